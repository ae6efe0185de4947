package exposure

import (
	"fmt"
	"math"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
)

// storedBytes is about what is read of a frame at a time: it stays in the second-level
// cache between reading and converting.
const storedBytes = 512 << 10

// Scratch is the memory of one reader. Reuse it.
type Scratch struct {
	stored          fitsutil.StoredRows
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

// Marked is called with the flags found in a block of pixels: rows of width w
// that begin at active pixel (x, y).
type Marked func(flags []calib.Flag, x, y, w int)

// Read fills dst, [row][column], with rows y0..y1-1 of a frame in electrons
// above the bias level, and returns how many pixels are saturated. Saturated
// pixels, and those without a value, which read as 0 and count as bad, are
// reported to mark, row by row of each amplifier.
func (c *Camera) Read(dst []float32, im *fitsutil.Image, y0, y1 int, s *Scratch, mark Marked) (saturated int, err error) {
	h := max(1, storedBytes/im.RowBytes()-2*c.reach())
	for at := y0; at < y1; at += h {
		next := min(at+h, y1)
		for i := range c.Amplifiers {
			n, err := c.readAmplifier(dst[(at-y0)*c.Columns:], im, &c.Amplifiers[i], at, next, s, mark)
			if err != nil {
				return 0, err
			}
			saturated += n
		}
	}
	return saturated, nil
}

// reach is how many rows away the overscan of a row's level may be.
func (c *Camera) reach() int {
	most := 0
	for i := range c.Amplifiers {
		if a := &c.Amplifiers[i]; a.hasOverscan {
			most = max(most, a.levels.HalfWindow)
		}
	}
	return most
}

// readAmplifier reads what of rows y0..y1-1 is an amplifier's; dst begins at row y0.
func (c *Camera) readAmplifier(dst []float32, im *fitsutil.Image, a *Amplifier, y0, y1 int, s *Scratch, mark Marked) (saturated int, err error) {
	first, last := max(y0, a.Place.Y0), min(y1, a.Place.Y0+a.Place.Raw.Height())
	if first >= last {
		return 0, nil
	}
	x0, x1, rawY0, _ := a.Place.Raw.Bounds0()
	rawFirst := rawY0 + first - a.Place.Y0
	if err := a.rowLevels(im, rawFirst, last-first, s); err != nil {
		return 0, err
	}
	for y := range last - first {
		row := dst[(first+y-y0)*c.Columns+a.Place.X0:][:x1-x0]
		if err := s.stored.Convert(row, x0, rawFirst+y); err != nil {
			return 0, err
		}
		if c.electrons(row, s.level[y], a.Gain) {
			if err := s.stored.Convert(row, x0, rawFirst+y); err != nil {
				return 0, err
			}
			saturated += c.markedElectrons(row, s, s.level[y], a, first+y, mark)
		}
	}
	return saturated, nil
}

// electrons turns ADU into electrons above the level, and tells whether there are pixels
// that are saturated or without a value.
func (c *Camera) electrons(row []float32, levelADU, gain float64) (marked bool) {
	if len(c.linearity) > 0 {
		return true // no pass that could be spared
	}
	full, level, g := float32(c.saturationADU), float32(levelADU), float32(gain)
	for x, v := range row {
		if !(v < full) {
			marked = true
		}
		row[x] = (v - level) * g
	}
	return marked
}

// markedElectrons is electrons for a row of an amplifier with such pixels: it reports them.
func (c *Camera) markedElectrons(row []float32, s *Scratch, level float64, a *Amplifier, y int, mark Marked) (saturated int) {
	s.flags = grow(s.flags, len(row))
	clear(s.flags)
	saturated = calib.FlagSaturated(s.flags, row, c.saturationADU)
	found := saturated > 0
	if len(c.linearity) > 0 {
		calib.ToElectrons(row, level, 1)
		calib.Linearise(row, c.linearity)
		level = 0
	}
	calib.ToElectrons(row, level, a.Gain)
	for x, v := range row {
		if v != v {
			row[x], found = 0, true
			s.flags[x] |= calib.BadPixel
		}
	}
	if found {
		mark(s.flags, a.Place.X0, y, len(row))
	}
	return saturated
}

// rowLevels puts the bias levels in ADU of h rows into s.level, and the rows into s.stored:
// of the overscan, read with the rows that its smoothing needs on both sides, so that
// a level does not depend on where a strip ends.
func (a *Amplifier) rowLevels(im *fitsutil.Image, rawFirst, h int, s *Scratch) error {
	s.level, s.variance = grow(s.level, h), grow(s.variance, h)
	if !a.hasOverscan {
		for y := range s.level {
			s.level[y] = a.biasADU
		}
		return s.stored.Read(im, rawFirst, rawFirst+h)
	}
	x0, x1, y0, y1 := a.overscan.Bounds0()
	first := max(y0, rawFirst-a.levels.HalfWindow)
	last := min(y1, rawFirst+h+a.levels.HalfWindow)
	if err := s.stored.Read(im, first, last); err != nil {
		return err
	}
	w := x1 - x0
	s.overscan = grow(s.overscan, w*(last-first))
	for y := first; y < last; y++ {
		if err := s.stored.Convert(s.overscan[(y-first)*w:][:w], x0, y); err != nil {
			return err
		}
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
