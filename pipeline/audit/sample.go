package audit

import (
	"context"
	"math"
	"math/bits"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/sequence"
)

// binned columns make one sample: a line's image is at least three wide, so that little
// light is lost, and frames whose light is below the noise are told apart with a third
// of the pixels.
const binned = 3

// sampler reads rows of frames.
type sampler struct {
	camera  *exposure.Camera
	album   *exposure.Album
	workers int
	// pedestals are frames without light; their mean is taken off, so that throughput
	// has no bias or dark current to act on.
	pedestals *exposure.Album
	// offsets is, by detector row and column, the variance of the bias level that a
	// sample's pixels have in common.
	offsets [][]float64
	rows    []int // candidates, in the order in which samples take them
	used    int
	gram    *hadamard.Gram
	parts   []*hadamard.Gram // of every fourth row
	data    []*rowData       // of the rows used
	level   []float64        // of each frame: sum of y/s
}

// candidateRows are the detector rows that coded mirror rows feed and sentinels do not
// reach, in an order whose beginnings all spread evenly over the detector.
func candidateRows(seq *sequence.Sequence) []int {
	rows := codedRows(seq, traceReach)
	if len(rows) == 0 {
		rows = codedRows(seq, 0)
	}
	// Bits read backwards put the second row between the first and the last, and so on.
	width := bits.Len(uint(max(len(rows)-1, 1)))
	var order []int
	for i := range 1 << width {
		if at := int(bits.Reverse64(uint64(i)) >> (64 - width)); at < len(rows) {
			order = append(order, rows[at])
		}
	}
	return order
}

// traceReach is how far, in rows, the trace leads light away from its row.
const traceReach = 8

func codedRows(seq *sequence.Sequence, reach float64) []int {
	p := seq.Profile
	first, last := p.WRange()
	reach += 0.5 + p.Spectrograph.LSFFWHMPx
	mirror := func(y float64) int {
		return int(math.Round(p.WCenter() + (y-p.Spectrograph.YCenterPx)/p.Spectrograph.WStepPx))
	}
	var rows []int
	for y := range p.Detector.Rows {
		w := mirror(float64(y))
		low, high := mirror(float64(y)-reach), mirror(float64(y)+reach)
		low, high = min(low, high), max(low, high)
		ok := w >= first && w <= last
		for _, r := range seq.Rows {
			switch r.Use {
			case sequence.UseSentinel:
				ok = ok && (r.Last < low || r.First > high)
			case sequence.UseClosed:
				ok = ok && (r.Element >= 0 || w < r.First || w > r.Last)
			}
		}
		if ok {
			rows = append(rows, y)
		}
	}
	return rows
}

// grow adds rows until so many are used, cleaned of the hits that a state tells (nil for
// none), and returns false if there are no more.
func (s *sampler) grow(ctx context.Context, rows int, st *state) (more bool, err error) {
	rows = min(rows, len(s.rows))
	if s.gram == nil {
		s.reset()
	}
	var rule *hitRule
	if st != nil {
		rule = s.rule(st)
	}
	scratch := make([]rowScratch, s.workers)
	for s.used < rows {
		// Rows are read side by side and added in order.
		n := min(s.workers, rows-s.used)
		sums := make([]*rowData, n)
		err := parallel.Do(ctx, s.workers, n, func(worker, i int) (err error) {
			sums[i], err = s.row(s.rows[s.used+i], &scratch[worker])
			if err == nil && rule != nil {
				rule.strike(sums[i])
			}
			return err
		})
		if err != nil {
			return false, err
		}
		for i, d := range sums {
			s.add(s.used+i, d)
		}
		s.data = append(s.data, sums...)
		s.used += n
		if err := s.release(); err != nil {
			return false, err
		}
	}
	return s.used < len(s.rows), nil
}

// release gives descriptors back where they are scarce.
func (s *sampler) release() error {
	for _, a := range []*exposure.Album{s.album, s.pedestals} {
		if a == nil {
			continue
		}
		for _, f := range a.Frames {
			if err := a.Done(f); err != nil {
				return err
			}
		}
	}
	return nil
}

type rowScratch struct {
	read      exposure.Scratch
	dark      []float32
	pedestals []float32 // [frame][column]
	flags     []calib.Flag
	all       []float32 // [frame][column]
	spoilt    []bool    // by column
	series    []float32
	y, s2     []float32 // [frame][sample]
}

// row takes the samples of a detector row of all frames.
func (s *sampler) row(y int, w *rowScratch) (*rowData, error) {
	columns, frames := s.camera.Columns, len(s.album.Frames)
	if w.dark == nil {
		w.dark, w.flags = make([]float32, columns), make([]calib.Flag, columns)
		if s.pedestals != nil {
			w.pedestals = make([]float32, len(s.pedestals.Frames)*columns)
		}
		w.all, w.spoilt = make([]float32, frames*columns), make([]bool, columns)
		w.series = make([]float32, frames)
		w.y, w.s2 = make([]float32, frames*(columns/binned)), make([]float32, frames*(columns/binned))
	}
	clear(w.spoilt)
	clear(w.dark)
	read := func(f *exposure.Frame, dst []float32) error {
		clear(w.flags)
		_, err := s.camera.Read(dst, f.Image, y, y+1, &w.read, func(found []calib.Flag, x, row, width int) {
			s.camera.Merge(w.flags, y, found, x, row, width)
		})
		for x, f := range w.flags {
			w.spoilt[x] = w.spoilt[x] || f != 0
		}
		return err
	}
	if s.pedestals != nil {
		for i, f := range s.pedestals.Frames {
			if err := read(f, w.pedestals[i*columns:(i+1)*columns]); err != nil {
				return nil, err
			}
		}
		s.pedestal(w, y)
	}
	for m, f := range s.album.Frames {
		if err := read(f, w.all[m*columns:(m+1)*columns]); err != nil {
			return nil, err
		}
	}
	s.strike(w, y)
	return s.bin(w, y), nil
}

// pedestal averages each pixel's readings without light, but for those that are a cosmic
// ray's. One left in would take light away from all frames of the night, and their noise
// with it.
func (s *sampler) pedestal(w *rowScratch, y int) {
	columns, frames := s.camera.Columns, len(s.pedestals.Frames)
	series := make([]float32, frames)
	for x := range columns {
		for m := range frames {
			series[m] = w.pedestals[m*columns+x]
		}
		middle := nth(series, (frames-1)/2)
		limit := middle + float32(strikeSigmas*math.Sqrt2*math.Sqrt(s.camera.Variance[y][x]+max(0, float64(middle))))
		kept := 0
		for m := range frames {
			if v := w.pedestals[m*columns+x]; !(v > limit) {
				kept++
			}
		}
		for m := range frames {
			if v := w.pedestals[m*columns+x]; !(v > limit) {
				w.dark[x] += v / float32(kept)
			}
		}
	}
}

// A reading is a cosmic ray's if it lies so many times the quartiles' distance, and of
// its noise, above the upper quartile of its series; a frame with more than a part of
// its readings so high is not struck but shows more light than it should. Any light is
// in half of the frames, so that it widens the quartiles; hits are rare.
const (
	strikeSpans  = 4
	strikeSigmas = 6
	strikePart   = 0.05
	// beside is where a pixel's neighbours are that it is compared with, beyond a
	// line's core: less their light, a star's continuum hides no hit.
	beside = 2
)

// strike marks the pixels that a cosmic ray struck in some frame, by their readings
// alone and by what they are above their neighbours'.
func (s *sampler) strike(w *rowScratch, y int) {
	columns, frames := s.camera.Columns, len(s.album.Frames)
	quiet := s.camera.Variance[y]
	alone, above := make([]float32, columns), make([]float32, columns)
	ratio := make([]float32, columns)
	for x := range columns {
		for m := range frames {
			w.series[m] = w.all[m*columns+x] - w.dark[x]
		}
		low, middle, high := quartiles(w.series)
		noise := math.Sqrt(quiet[x] + max(0, float64(high)))
		alone[x] = high + strikeSpans*(high-low) + float32(strikeSigmas*noise)
		ratio[x], above[x] = 0, alone[x]
		if x < beside || x >= columns-beside {
			continue
		}
		for m := range frames {
			w.series[m] = w.neighbours(m, x, columns)
		}
		if around := nth(w.series, frames/2); around > 0 && middle > 0 {
			ratio[x] = min(middle/around, 2)
		}
		for m := range frames {
			w.series[m] = w.all[m*columns+x] - w.dark[x] - ratio[x]*w.neighbours(m, x, columns)
		}
		low, _, top := quartiles(w.series)
		above[x] = top + strikeSpans*(top-low) + float32(strikeSigmas*math.Sqrt2*noise)
	}
	for m := range frames {
		row := w.all[m*columns : (m+1)*columns]
		hit := func(x int) bool {
			v := row[x] - w.dark[x]
			return v > alone[x] || ratio[x] > 0 && v-ratio[x]*w.neighbours(m, x, columns) > above[x]
		}
		struck := 0
		for x := range row {
			if hit(x) {
				struck++
			}
		}
		if struck == 0 || float64(struck) > strikePart*float64(columns) {
			continue
		}
		for x := range row {
			w.spoilt[x] = w.spoilt[x] || hit(x)
		}
	}
}

// neighbours is the mean light beside a pixel.
func (w *rowScratch) neighbours(m, x, columns int) float32 {
	row := w.all[m*columns : (m+1)*columns]
	return (row[x-beside] - w.dark[x-beside] + row[x+beside] - w.dark[x+beside]) / 2
}

// levelVariances are those of the bias levels, by detector row and column; rows of the
// same amplifiers share theirs.
func levelVariances(c *exposure.Camera) [][]float64 {
	of := c.AmplifierOf()
	all := make([][]float64, c.Rows)
	for y, amplifiers := range of {
		if y > 0 && slices.Equal(amplifiers, of[y-1]) {
			all[y] = all[y-1]
			continue
		}
		all[y] = make([]float64, c.Columns)
		for x, a := range amplifiers {
			all[y][x], _ = c.Amplifiers[a].LevelVariance()
		}
	}
	return all
}

// glow is the dark current of each pixel, whose noise is in every frame: its pedestal
// where that stands out, else the mean of the others, since a noisy variance would make
// chi-square too large.
func (s *sampler) glow(w *rowScratch, y int) []float64 {
	out := make([]float64, len(w.dark))
	if s.pedestals == nil {
		return out
	}
	frames := float64(len(s.pedestals.Frames))
	mean, n := 0.0, 0.0
	for x, v := range w.dark {
		if float64(v) > strikeSigmas*math.Sqrt(s.camera.Variance[y][x]/frames) {
			out[x] = float64(v)
			continue
		}
		mean, n = mean+float64(v), n+1
	}
	for x, v := range out {
		if v == 0 && n > 0 {
			out[x] = max(0, mean/n)
		}
	}
	return out
}

// bin adds up the row's good pixels by threes.
func (s *sampler) bin(w *rowScratch, y int) *rowData {
	columns, frames := s.camera.Columns, len(s.album.Frames)
	stride := columns / binned
	quiet := s.camera.Variance[y]
	photon := 1 + s.camera.PhotonExcess
	glow := s.glow(w, y)
	n := 0
	var floor float64
	for x := 0; x+binned <= columns; x += binned {
		good := true
		dark := s.offsets[y][x+binned/2] * binned * binned
		for i := range binned {
			good = good && !w.spoilt[x+i]
			dark += quiet[x+i]
			dark += photon * glow[x+i]
		}
		if !good {
			continue
		}
		for m := range frames {
			var sum float64
			for i := range binned {
				sum += float64(w.all[m*columns+x+i] - w.dark[x+i])
			}
			w.y[m*stride+n], w.s2[m*stride+n] = float32(sum), float32(dark+photon*sum)
		}
		if floor == 0 || dark < floor {
			floor = dark
		}
		n++
	}
	d := &rowData{y: make([]float32, frames*n), s2: make([]float32, frames*n), n: n, floor: floor, struck: make([]bool, n)}
	for m := range frames {
		copy(d.y[m*n:(m+1)*n], w.y[m*stride:])
		copy(d.s2[m*n:(m+1)*n], w.s2[m*stride:])
	}
	return d
}
