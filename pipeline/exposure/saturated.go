package exposure

import (
	"mirrorloom/calib"
	"mirrorloom/fitsutil"
)

// Saturated reports to mark the saturated pixels of one row of a frame, as Read does,
// without its levels.
func (c *Camera) Saturated(im *fitsutil.Image, y int, s *Scratch, mark Marked) error {
	for i := range c.Amplifiers {
		p := &c.Amplifiers[i].Place
		if y < p.Y0 || y >= p.Y0+p.Raw.Height() {
			continue
		}
		x0, x1, rawY0, _ := p.Raw.Bounds0()
		raw := rawY0 + y - p.Y0
		s.raw = grow(s.raw, x1-x0)
		if err := s.stored.Read(im, raw, raw+1); err != nil {
			return err
		}
		if err := s.stored.Convert(s.raw, x0, raw); err != nil {
			return err
		}
		s.flags = grow(s.flags, x1-x0)
		clear(s.flags)
		if calib.FlagSaturated(s.flags, s.raw, c.saturationADU) > 0 {
			mark(s.flags, p.X0, y, x1-x0)
		}
	}
	return nil
}
