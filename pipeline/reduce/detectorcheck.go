package reduce

import (
	"context"
	"errors"
	"math"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// Of biases and of lamp frames at most so many pairs are compared, and of each at most
// so many pixels an amplifier, whole rows spread over it: the error of a gain from one
// pair of 1e5 pixels is 0.5 %, and all pairs are in memory at the same time.
const (
	transferPairs  = 4
	transferPixels = 1 << 17
)

// checkDetector measures gain and read noise and compares them with the profile:
// the profile's values stay in use, but the user is told.
func (r *reduction) checkDetector(ctx context.Context, m *wholeMasters) error {
	biases := firstPairs(r.roles.calibration.bias, true)
	l := &r.roles.calibration.lamps
	var flats []framePair
	for _, frames := range [][]*exposure.Frame{l.on, l.even, l.odd} {
		flats = append(flats, firstPairs(frames, false)...)
	}
	flats = flats[:min(len(flats), transferPairs)]
	if len(flats) == 0 || len(biases) == 0 {
		return nil
	}
	return r.transfer(ctx, m, append(biases, flats...))
}

// framePair is two frames of the same light, or of none.
type framePair struct {
	frames [2]*exposure.Frame
	dark   bool
}

func firstPairs(frames []*exposure.Frame, dark bool) []framePair {
	var pairs []framePair
	for i := 0; i+1 < len(frames) && len(pairs) < transferPairs; i += 2 {
		pairs = append(pairs, framePair{[2]*exposure.Frame{frames[i], frames[i+1]}, dark})
	}
	return pairs
}

// transfer measures gain and read noise of every amplifier.
func (r *reduction) transfer(ctx context.Context, m *wholeMasters, pairs []framePair) error {
	blocks := make([][]calib.Pair, len(r.camera.Amplifiers))
	for _, pair := range pairs {
		var e [2]*calib.Exposure
		for i, f := range pair.frames {
			var err error
			if e[i], err = r.lampExposure(f, m, false, new(exposure.Scratch)); err != nil {
				return err
			}
		}
		if err := ctx.Err(); err != nil {
			return err
		}
		for a := range blocks {
			block := r.amplifierPair(a, e)
			block.Dark = pair.dark
			blocks[a] = append(blocks[a], block)
		}
	}
	for a, pairs := range blocks {
		measured, err := calib.DefaultTransferRule().Measure(pairs)
		if errors.Is(err, calib.ErrNoLight) {
			continue
		}
		if err != nil {
			return err
		}
		r.perRead(&measured)
		p := r.seq.Profile.Detector.Amplifiers[a]
		r.report.Amplifiers = append(r.report.Amplifiers, product.Amplifier{
			GainEPerADU: measured.Gain, GainError: measured.GainError,
			ReadNoiseE: measured.ReadNoise, ReadNoiseError: measured.ReadNoiseError,
		})
		r.compare(a, "gain", measured.Gain, measured.GainError, p.GainEPerADU, "e/ADU")
		r.compare(a, "read noise", measured.ReadNoise, measured.ReadNoiseError, p.ReadNoiseE, "e")
	}
	return nil
}

// perRead turns what the pairs show into what the profile gives: the pairs' variance
// is Photon times that of the electrons, and Read times that of one read.
func (r *reduction) perRead(t *calib.Transfer) {
	n := r.camera.Noise
	one := n.Photon / math.Sqrt(n.Read)
	t.Gain, t.GainError = t.Gain*n.Photon, t.GainError*n.Photon
	t.ReadNoise, t.ReadNoiseError = t.ReadNoise*one, t.ReadNoiseError*one
}

// compare warns of a value that differs from the profile's beyond doubt and by
// enough to matter in the errors.
func (r *reduction) compare(amplifier int, what string, value, err, profile float64, unit string) {
	const matters, sigmas = 0.03, 4
	if d := math.Abs(value - profile); d > matters*profile && d > sigmas*err {
		r.warn("amplifier %d: the %s measured is %.4g +- %.2g %s, the profile's %.4g; errors are off by as much", amplifier+1, what, value, err, unit, profile)
	}
}

// amplifierPair cuts an amplifier's pixels out of two exposures, in ADU: every row, or
// as few of them as transferPixels allow.
func (r *reduction) amplifierPair(a int, e [2]*calib.Exposure) calib.Pair {
	amp := &r.camera.Amplifiers[a]
	w, h := amp.Place.Raw.Width(), amp.Place.Raw.Height()
	every := (w*h + transferPixels - 1) / transferPixels
	h /= every
	pair := calib.Pair{A: make([]float32, w*h), B: make([]float32, w*h), Flags: make([]calib.Flag, w*h), Width: w}
	gain := float32(amp.Gain)
	for y := range h {
		for x := range w {
			from, to := (amp.Place.Y0+y*every)*r.camera.Columns+amp.Place.X0+x, y*w+x
			pair.A[to], pair.B[to] = e[0].Signal[from]/gain, e[1].Signal[from]/gain
			pair.Flags[to] = e[0].Flags[from] | e[1].Flags[from]
		}
	}
	return pair
}

// persistence compares each arc frame that directly follows a flat with that flat:
// what it left behind shows between the arc's lines, those found and those listed. An
// arc frame like it that follows another arc is taken off first: what leaks past closed
// mirrors lies where the flat's light lies, and is the same in both.
func (r *reduction) persistence(m *wholeMasters, arcs []calib.ArcFrame) error {
	byStep := map[int]*exposure.Frame{}
	for _, f := range r.roles.calibration.lamps.all() {
		byStep[f.Step] = f
	}
	var fit calib.PersistenceFit
	found := false
	for i, f := range r.roles.arcs {
		before, ok := byStep[f.Step-1]
		if !ok || r.seq.Steps[f.Step-1].Kind != sequence.Flat {
			continue
		}
		if pattern, _ := r.seq.Pattern(f.Step - 1); pattern == sequence.PatternOff {
			continue // nothing that could stay
		}
		left, err := r.lampExposure(f, m, false, new(exposure.Scratch))
		if err != nil {
			return err
		}
		lit, err := r.lampExposure(before, m, false, new(exposure.Scratch))
		if err != nil {
			return err
		}
		like := r.likeArc(i)
		if like >= 0 {
			other, err := r.lampExposure(r.roles.arcs[like], m, false, new(exposure.Scratch))
			if err != nil {
				return err
			}
			calib.Subtract(left.Signal, other.Signal, 1)
			for p, v := range other.Variance {
				left.Variance[p] += v
				left.Flags[p] |= other.Flags[p]
			}
		}
		for y := range r.camera.Rows {
			a, b := y*r.camera.Columns, (y+1)*r.camera.Columns
			r.hideLines(left.Flags[a:b], arcs[i], y)
			if like >= 0 {
				r.hideLines(left.Flags[a:b], arcs[like], y)
			}
			fit.Add(left.Signal[a:b], left.Variance[a:b], lit.Signal[a:b], left.Flags[a:b])
		}
		fit.NextFrame()
		found = true
	}
	if !found {
		return nil
	}
	p := fit.Solve()
	if math.IsNaN(p.Share) {
		return nil
	}
	r.report.Persistence = &product.Measured{Value: p.Share, Error: p.Error}
	const matters, sigmas = 1e-3, 5
	if p.Share > matters && p.Share > sigmas*p.Error {
		r.warn("%.2g +- %.1g of each frame's charge appears in the next; it is not corrected", p.Share, p.Error)
	}
	return nil
}

// likeArc is an arc frame of the lamp and exposure of arc i that follows another arc, the
// nearest; -1 if there is none.
func (r *reduction) likeArc(i int) int {
	step := func(i int) sequence.Step { return r.seq.Steps[r.roles.arcs[i].Step] }
	best := -1
	for j := range r.roles.arcs {
		at := r.roles.arcs[j].Step
		if j == i || at == 0 || r.seq.Steps[at-1].Kind != sequence.Arc || step(j).Lamp != step(i).Lamp || step(j).ExptimeSeconds != step(i).ExptimeSeconds {
			continue
		}
		if best < 0 || max(j-i, i-j) < max(best-i, i-best) {
			best = j
		}
	}
	return best
}

// hideLines flags the pixels of a row that a line of the arc may reach.
func (r *reduction) hideLines(flags []calib.Flag, arc calib.ArcFrame, y int) {
	const widths = 3 // a Gaussian is 1e-11 of its peak there
	reach := widths * r.seq.Profile.Spectrograph.LSFFWHMPx
	g := &r.optics.geometry
	hide := func(x float64) {
		for i := max(0, int(x-reach)); i <= min(len(flags)-1, int(x+reach)); i++ {
			flags[i] |= calib.NoData
		}
	}
	for _, line := range arc.Lines {
		row := float64(y)
		x := g.X(float64(arc.Element), row, line.VacuumNM)
		hide(g.X(float64(arc.Element), row-g.TraceShift(x), line.VacuumNM))
	}
	for _, peak := range arc.Peaks {
		hide(peak.X)
	}
}
