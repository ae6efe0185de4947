package reduce

import (
	"math"
	"slices"

	"mirrorloom/calib"
)

// Mirrors stuck on show a lamp's lines in every arc frame, whatever its element, at the
// same places.

// leastArcs frames tell what does not move with the element.
const leastArcs = 4

// dropStuckLines takes from the lines of arc frames those of mirrors stuck on: what most
// of the other frames have within half a width fwhm in the same rows; and what stands
// within a width of such a line, whose place it would spoil: fits part lines that are wider
// apart.
func (s *stuckMirrors) dropStuckLines(frames []calib.ArcFrame, fwhm float64) {
	if !s.anyOn() || len(frames) < leastArcs {
		return
	}
	var constant []calib.Peak
	for i := range frames {
		for _, p := range frames[i].Peaks {
			seen := 0
			for k := range frames {
				if frames[k].Element != frames[i].Element && slices.ContainsFunc(frames[k].Peaks, func(q calib.Peak) bool { return near(p, q, fwhm/2) }) {
					seen++
				}
			}
			if 2*seen >= len(frames)-1 {
				constant = append(constant, p)
			}
		}
	}
	for i := range frames {
		frames[i].Peaks = slices.DeleteFunc(frames[i].Peaks, func(p calib.Peak) bool {
			return slices.ContainsFunc(constant, func(q calib.Peak) bool { return near(p, q, fwhm) })
		})
	}
}

// near tells whether two lines share rows and stand within a distance.
func near(p, q calib.Peak, distance float64) bool {
	return math.Abs(p.X-q.X) <= distance && p.FirstRow <= q.LastRow && q.FirstRow <= p.LastRow
}
