package skyflux

import (
	"context"
	"sync"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// counter tells how many of a total are done, one caller at a time.
type counter struct {
	mu          sync.Mutex
	done, total int
	tell        func(done, total int)
}

func (c *counter) add() {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.done++
	c.tell(c.done, c.total)
}

// Write copies the images of s to a cube that has the same images in the same order, and
// SKYSHARE as the last one with a sky: the sky taken off, then counts turned into flux;
// nil for either that is not to be done. It gives the number of good voxels that have no
// sky or flux and lost their data, and that of the good ones that are left.
func (s *Source) Write(ctx context.Context, to *fitsutil.Cube, sky *Sky, flux *calib.FluxScale, o Options) (voided, good int, err error) {
	o.setDefaults()
	var mu sync.Mutex
	err = s.each(ctx, "write", o, 9, func(p *plane, l int) error {
		before := p.count()
		if sky != nil {
			sky.spectrum.Subtract(l, p.signal, p.variance, p.flags, product.FlagBad, sky.Part)
		}
		if flux != nil {
			flux.Apply(l, p.signal, p.variance, p.flags)
		}
		after := p.count()
		mu.Lock()
		voided, good = voided+before-after, good+after
		mu.Unlock()
		if err := s.scale.ReadPlaneRows(p.scratch, l, 0, s.Rows); err != nil {
			return err
		}
		for image, data := range []any{product.SignalImage: p.signal, product.VarianceImage: p.variance, product.FlagsImageIndex: p.flags, product.ScaleImage: p.scratch} {
			if err := to.WriteStrip(image, 0, s.Rows, l, 1, data); err != nil {
				return err
			}
		}
		return nil
	})
	if err != nil {
		return 0, 0, err
	}
	next, err := s.copyRest(ctx, to)
	if err == nil && sky != nil {
		err = to.WriteStrip(next, 0, s.Rows, 0, 2, sky.Share())
	}
	return voided, good, err
}

// count is the number of good voxels.
func (p *plane) count() int {
	n := 0
	for i := range p.signal {
		if p.good(i) {
			n++
		}
	}
	return n
}

// copyRest copies the images behind the first four, row by row, and gives their number.
func (s *Source) copyRest(ctx context.Context, to *fitsutil.Cube) (next int, err error) {
	next = product.ScaleImage + 1
	for _, u := range s.file.HDUs()[next+1:] {
		if u.Kind != fitsutil.ImageHDU {
			continue
		}
		im, err := s.file.Image(u.Index)
		if err != nil {
			return 0, err
		}
		row := make([]float32, im.Width())
		for l := range im.Planes() {
			for y := range im.Height() {
				if err := ctx.Err(); err != nil {
					return 0, err
				}
				if err := im.ReadPlaneRows(row, l, y, y+1); err != nil {
					return 0, err
				}
				if err := to.WriteStrip(next, y, 1, l, 1, row); err != nil {
					return 0, err
				}
			}
		}
		next++
	}
	return next, nil
}
