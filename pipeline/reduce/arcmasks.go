package reduce

import (
	"errors"
	"fmt"
	"math"

	"mirrorloom/calib"
)

// maskFault looks for masks that are all wrong alike, which leave the dark columns dark:
// arcs that contradict the profile may agree with it if every mask is flipped along the
// dispersion (x falls as j rises), or shifted by more than the search for the light's
// offset allows. why is what the arcs as labelled led to; the answer is why itself if
// no such fault explains them.
func (r *reduction) maskFault(frames []calib.ArcFrame, why error) error {
	n := r.seq.N()
	moved := func(to func(j int) int) []calib.ArcFrame {
		all := make([]calib.ArcFrame, len(frames))
		for i, f := range frames {
			f.Element = to(f.Element)
			all[i] = f
		}
		return all
	}
	if len(frames) < 2 {
		return why // one place tells no direction
	}
	if r.arcsAgree(moved(func(j int) int { return n - 1 - j })) {
		return errors.New("the arcs show every mask flipped along the dispersion: element j lights the place of element n-1-j; flip the masks of the sequence for this device and take the night again")
	}
	reach := r.arcRule().ShiftPx
	step := max(1, int(reach/math.Abs(r.optics.geometry.X_e)))
	for s := step; s < n; s += step {
		for _, by := range []int{s, -s} {
			if r.arcsAgree(moved(func(j int) int { return j + by })) {
				return fmt.Errorf("the arcs show every mask shifted by about %+d elements along the dispersion; shift the masks back and take the night again, or correct x_center_px in the profile and plan again", by)
			}
		}
	}
	return why
}

// agreePx is the largest scatter of lines that are the right ones: blends and a smile
// that the model lacks leave a tenth of a pixel.
const agreePx = 0.3

// arcsAgree tells whether frames can be solved, by lines that belong together.
func (r *reduction) arcsAgree(frames []calib.ArcFrame) bool {
	solution, err := calib.SolveArcs(r.optics.geometry, frames, r.arcRule())
	return err == nil && r.worstError(solution) < hopelessPx && solution.RMSPx < agreePx
}
