package reduce

import (
	"fmt"
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
)

// camera turns rows of raw frames into electrons above the bias level, in
// active pixels.
type camera struct {
	columns, rows int
	saturationADU float64
	linearity     []float64 // see calib.Linearise
	amplifiers    []amplifier
	// variance gives, by detector row, the variance of a sample without light
	// in every column, electrons squared; rows of the same amplifiers share it.
	variance [][]float64
	// photonExcess: the variance of light is (1 + photonExcess) times the light, as
	// the read mode makes it; 0 for single reads.
	photonExcess float64
	noise        physics.EffectiveNoise // of the read mode
}

// amplifier is one readout chain with the place of its pixels.
type amplifier struct {
	place       instrument.Placement
	overscan    instrument.Section
	hasOverscan bool
	levels      calib.Overscan
	gain        float64 // electrons per ADU
	biasADU     float64 // where there is no overscan
	variance    float64 // of a sample without light, electrons squared
}

func newCamera(d *instrument.Detector) (*camera, error) {
	c := &camera{columns: d.Columns, rows: d.Rows, saturationADU: d.SaturationADU, linearity: d.Linearity}
	mode := d.Mode()
	var err error
	if c.noise, err = (physics.ReadMode{Kind: physics.ReadKind(mode.Kind), Reads: mode.Reads, Spacing: mode.Spacing}).Noise(); err != nil {
		return nil, fmt.Errorf("detector.read_mode of the profile: %w", err)
	}
	c.photonExcess = c.noise.Photon - 1
	for i, place := range d.Active() {
		a := d.Amplifiers[i]
		amp := amplifier{place: place, gain: a.GainEPerADU, biasADU: a.BiasADU, variance: calib.ReadVariance(a.ReadNoiseE*math.Sqrt(c.noise.Read), a.GainEPerADU)}
		if amp.overscan, amp.hasOverscan = a.Overscan.Section(); amp.hasOverscan {
			if amp.overscan[2] > a.Data[2] || amp.overscan[3] < a.Data[3] {
				return nil, fmt.Errorf("the overscan of amplifier %d spans rows %d to %d, not all of its data's rows %d to %d; mend detector.amplifiers of the profile", i+1, amp.overscan[2], amp.overscan[3], a.Data[2], a.Data[3])
			}
			amp.levels = calib.DefaultOverscan(amp.overscan.Width())
			// The level's own noise: read noise over the pixels it averages.
			amp.variance *= 1 + 1/float64(amp.averaged())
		}
		c.amplifiers = append(c.amplifiers, amp)
	}
	c.variance = c.variances()
	return c, nil
}

// averaged is how many overscan pixels a level is the mean of, 0 without overscan.
func (a *amplifier) averaged() int {
	if !a.hasOverscan {
		return 0
	}
	return min(a.overscan.Height(), 2*a.levels.HalfWindow+1) * a.overscan.Width()
}

// amplifierOf gives the amplifier of each column, by detector row; rows of the same
// amplifiers share it.
func (c *camera) amplifierOf() [][]uint8 {
	all := make([][]uint8, c.rows)
	for y := range all {
		row := make([]uint8, c.columns)
		for i := range c.amplifiers {
			p := &c.amplifiers[i].place
			if y >= p.Y0 && y < p.Y0+p.Raw.Height() {
				for x := p.X0; x < p.X0+p.Raw.Width(); x++ {
					row[x] = uint8(i)
				}
			}
		}
		if y > 0 && slices.Equal(row, all[y-1]) {
			row = all[y-1]
		}
		all[y] = row
	}
	return all
}

// variances fills in camera.variance.
func (c *camera) variances() [][]float64 {
	all := make([][]float64, c.rows)
	for y := range all {
		row := make([]float64, c.columns)
		for i := range c.amplifiers {
			a := &c.amplifiers[i]
			if y >= a.place.Y0 && y < a.place.Y0+a.place.Raw.Height() {
				for x := a.place.X0; x < a.place.X0+a.place.Raw.Width(); x++ {
					row[x] = a.variance
				}
			}
		}
		if y > 0 && equal(row, all[y-1]) {
			row = all[y-1]
		}
		all[y] = row
	}
	return all
}

func equal(a, b []float64) bool {
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

// readScratch is the memory of one reader. Reuse it.
type readScratch struct {
	raw, overscan   []float32
	flags           []calib.Flag
	level, variance []float64
}

func grow[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

// marked is called with the flags found in a block of pixels: rows of width w
// that begin at active pixel (x, y).
type marked func(flags []calib.Flag, x, y, w int)

// read fills dst, [row][column], with rows y0..y1-1 of a frame in electrons
// above the bias level, and returns how many pixels are saturated. Saturated
// pixels, and those without a value, which read as 0 and count as bad, are
// reported to mark.
func (c *camera) read(dst []float32, im *fitsutil.Image, y0, y1 int, s *readScratch, mark marked) (saturated int, err error) {
	for i := range c.amplifiers {
		a := &c.amplifiers[i]
		first, last := max(y0, a.place.Y0), min(y1, a.place.Y0+a.place.Raw.Height())
		if first >= last {
			continue
		}
		n, err := c.readAmplifier(dst, im, a, y0, first, last, s, mark)
		if err != nil {
			return 0, err
		}
		saturated += n
	}
	return saturated, nil
}

func (c *camera) readAmplifier(dst []float32, im *fitsutil.Image, a *amplifier, y0, first, last int, s *readScratch, mark marked) (saturated int, err error) {
	x0, x1, rawY0, _ := a.place.Raw.Bounds0()
	rawFirst := rawY0 + first - a.place.Y0
	w, h := x1-x0, last-first
	s.raw = grow(s.raw, w*h)
	if err := im.ReadSection(s.raw, x0, x1, rawFirst, rawFirst+h); err != nil {
		return 0, err
	}
	if err := a.rowLevels(im, rawFirst, h, s); err != nil {
		return 0, err
	}
	s.flags = grow(s.flags, w*h)
	clear(s.flags)
	saturated = calib.FlagSaturated(s.flags, s.raw, c.saturationADU)
	found := saturated > 0
	for y := range h {
		row := s.raw[y*w : (y+1)*w]
		level := s.level[y]
		if len(c.linearity) > 0 {
			calib.ToElectrons(row, level, 1)
			calib.Linearise(row, c.linearity)
			level = 0
		}
		calib.ToElectrons(row, level, a.gain)
		for x, v := range row {
			if v != v {
				row[x], found = 0, true
				s.flags[y*w+x] |= calib.BadPixel
			}
		}
		copy(dst[(first+y-y0)*c.columns+a.place.X0:], row)
	}
	if found {
		mark(s.flags, a.place.X0, first, w)
	}
	return saturated, nil
}

// rowLevels puts the bias levels in ADU of h rows into s.level: of the
// overscan, read with the rows that its smoothing needs on both sides, so that
// a level does not depend on where a strip ends.
func (a *amplifier) rowLevels(im *fitsutil.Image, rawFirst, h int, s *readScratch) error {
	s.level, s.variance = grow(s.level, h), grow(s.variance, h)
	if !a.hasOverscan {
		for y := range s.level {
			s.level[y] = a.biasADU
		}
		return nil
	}
	x0, x1, y0, y1 := a.overscan.Bounds0()
	first := max(y0, rawFirst-a.levels.HalfWindow)
	last := min(y1, rawFirst+h+a.levels.HalfWindow)
	s.overscan = grow(s.overscan, (x1-x0)*(last-first))
	if err := im.ReadSection(s.overscan, x0, x1, first, last); err != nil {
		return err
	}
	if err := a.levels.Levels(s.level, s.variance, s.overscan, rawFirst-first); err != nil {
		return err
	}
	for y, v := range s.level {
		if math.IsNaN(v) {
			return fmt.Errorf("no value in the overscan of raw row %d; is the profile's overscan section right?", rawFirst+y+1)
		}
	}
	return nil
}
