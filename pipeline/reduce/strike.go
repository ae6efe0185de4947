package reduce

import (
	"sync"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
)

// struckSample is a pixel of a strip whose sample in some frame is not to be used, and why.
type struckSample struct {
	pixel  int
	reason calib.Flag
}

// collectStruck gives the receiver of the flags of a frame: it lists the frame's struck
// samples within the strip. A saturated pixel strikes its neighbours in the column as
// well, into which a full pixel's charge bleeds.
func (r *stripReader) collectStruck(s *strip, worker int) exposure.Marked {
	r.struck[worker] = r.struck[worker][:0]
	return func(flags []calib.Flag, x, y, w int) {
		for i, f := range flags {
			if f == 0 {
				continue
			}
			reach := 0
			if f&calib.Saturated != 0 {
				reach = 1
			}
			for row := y + i/w - reach; row <= y+i/w+reach; row++ {
				if row >= s.y0 && row < s.y1 {
					r.struck[worker] = append(r.struck[worker], struckSample{(row-s.y0)*s.columns + x + i%w, f})
				}
			}
		}
	}
}

// nearby looks for charge that bleeds into the strip from the rows around it, so that
// what is struck does not depend on where strips end.
func (r *stripReader) nearby(s *strip, f *exposure.Frame, worker int, mark exposure.Marked) error {
	for _, y := range []int{s.y0 - 1, s.y1} {
		if y < 0 || y >= r.camera.Rows {
			continue
		}
		if err := r.camera.Saturated(f.Image, y, &r.scratch[worker], mark); err != nil {
			return err
		}
	}
	return nil
}

// strike puts NaN into the samples of slot i that the last frame showed to be struck.
func (r *stripReader) strike(s *strip, i, worker int, mu *sync.Mutex) {
	if !r.restore || len(r.struck[worker]) == 0 {
		return
	}
	slot := s.slot(i)
	mu.Lock()
	defer mu.Unlock()
	for _, one := range r.struck[worker] {
		slot[one.pixel] = missing32
		s.struck[one.pixel] |= one.reason
	}
}
