package reduce

import (
	"context"
	"math"
	"slices"

	"mirrorloom/calib"
)

// An amplifier is dark if of the pixels that the lamp should light well, above
// wellLit of the brightest, fewer than fewLit show light beyond sureSigmas, while
// another amplifier's do.
const (
	wellLit    = 0.2
	fewLit     = 0.1
	sureSigmas = 10
)

// findDarkAmplifiers looks for amplifiers that give no light in the lamp's all-on
// frames. Their pixels take part in no other calibration. The search for dead pixels
// does not see them: it compares a pixel with its neighbours, and they are as dark.
func (r *reduction) findDarkAmplifiers(ctx context.Context, m *wholeMasters) error {
	frames := r.roles.calibration.lamps.on
	if len(r.camera.Amplifiers) < 2 || len(frames) == 0 {
		return nil
	}
	e, err := r.sumExposures(ctx, frames, m, false)
	if err != nil {
		return err
	}
	expected := make([]float32, len(e.Signal))
	if err := calib.LampShape(expected, r.optics.geometry, r.seq.N(), r.camera.Columns, r.seq.Profile.Spectrograph.LSFFWHMPx, r.lampAt); err != nil {
		return err
	}
	var dark []int
	lit := 0
	for a := range r.camera.Amplifiers {
		switch share := r.litShare(a, e, expected); {
		case math.IsNaN(share):
		case share < fewLit:
			dark = append(dark, a)
		default:
			lit++
		}
	}
	if lit == 0 {
		return nil // the lamp is off
	}
	for _, a := range dark {
		r.degrade("amplifier %d shows no light of the lamp: its pixels are flagged LOWFLAT; look at its cable and electronics, or the detector section in the profile", a+1)
		r.eachPixel(a, func(i int) { m.bad[i] |= calib.BadPixel })
	}
	r.optics.darkAmplifiers = dark
	return nil
}

// litShare is the share of an amplifier's well lit pixels that show light; not a number
// where it has too few to tell.
func (r *reduction) litShare(a int, e *calib.Exposure, expected []float32) float64 {
	const least = 100
	limit := wellLit * slices.Max(expected)
	first, last := r.litRows(r.seq.N() / 2)
	wanted, lit := 0, 0
	r.eachPixel(a, func(i int) {
		if y := i / r.camera.Columns; y < first || y > last || !(expected[i] > limit) || e.Flags[i] != 0 {
			return
		}
		wanted++
		if v := float64(e.Signal[i]); v > sureSigmas*math.Sqrt(float64(e.Variance[i])) {
			lit++
		}
	})
	if wanted < least {
		return math.NaN()
	}
	return float64(lit) / float64(wanted)
}

// eachPixel visits the pixels of an amplifier.
func (r *reduction) eachPixel(a int, visit func(i int)) {
	p := &r.camera.Amplifiers[a].Place
	for y := p.Y0; y < p.Y0+p.Raw.Height(); y++ {
		for x := p.X0; x < p.X0+p.Raw.Width(); x++ {
			visit(y*r.camera.Columns + x)
		}
	}
}

// flagDarkAmplifiers flags their pixels in the response, of which an even one is made
// where none was measured.
func (r *reduction) flagDarkAmplifiers() {
	if len(r.optics.darkAmplifiers) == 0 {
		return
	}
	if r.optics.pixel == nil {
		n := r.camera.Columns * r.camera.Rows
		p := &calib.PixelResponse{Width: r.camera.Columns, Factor: make([]float32, n), Variance: make([]float32, n), Flags: make([]calib.Flag, n)}
		for i := range p.Factor {
			p.Factor[i] = 1
		}
		r.optics.pixel = p
	}
	for _, a := range r.optics.darkAmplifiers {
		r.eachPixel(a, func(i int) { r.optics.pixel.Flags[i] |= calib.LowFlat })
	}
}
