package calib

import "slices"

// StandIn estimates what a struck sample of a frame would have read, from the mean of
// the other frames at its pixel and from how the frame compares with that mean on the
// pixels beside it in the row. It looks along the row alone, so that it does not depend
// on which rows are at hand together.
type StandIn struct {
	// Reach is how many pixels on either side are compared; Least how many of them have
	// to be usable.
	Reach, Least int
}

// DefaultStandIn: 5 on either side, so that a line with a FWHM of 3 pixels is seen with
// both flanks; with fewer than 4 pixels a scatter says nothing.
func DefaultStandIn() StandIn { return StandIn{Reach: 5, Least: 4} }

// Estimate gives the value of pixel x of a frame's row, and its variance: with the
// ratio r that makes the sum of |frame - r mean| over the usable neighbours the least,
// whatever a few of them are,
//
//	value = r mean[x],   variance = sum (frame - r mean)^2 / (n - 1)
//
// The variance includes the noise of a reading besides what the frame's light differs
// from the mean's in shape: an estimate is worth no more than a reading. frame and mean
// are rows of the same length and units, without pedestal; usable tells of a pixel
// other than x whether both are to be trusted there. ok is false where there are fewer
// than Least, or the mean has no light on any.
func (s StandIn) Estimate(frame, mean []float32, usable func(x int) bool, x int) (value, variance float64, ok bool) {
	near := make([]int, 0, 2*s.Reach)
	for u := max(x-s.Reach, 0); u <= min(x+s.Reach, len(frame)-1); u++ {
		if u != x && usable(u) {
			near = append(near, u)
		}
	}
	if len(near) < max(2, s.Least) {
		return 0, 0, false
	}
	r, ok := leastAbsoluteRatio(frame, mean, near)
	if !ok {
		return 0, 0, false
	}
	sum := 0.0
	for _, u := range near {
		miss := float64(frame[u]) - r*float64(mean[u])
		sum += miss * miss
	}
	return r * float64(mean[x]), sum / float64(len(near)-1), true
}

// leastAbsoluteRatio is the r with the least sum of |frame - r mean|: the median of
// frame/mean, each weighing as much as |mean|. There is none where all mean are 0.
func leastAbsoluteRatio(frame, mean []float32, near []int) (r float64, ok bool) {
	type ratio struct{ r, weight float64 }
	list := make([]ratio, 0, len(near))
	total := 0.0
	for _, u := range near {
		m := float64(mean[u])
		if m == 0 {
			continue
		}
		weight := max(m, -m)
		list = append(list, ratio{float64(frame[u]) / m, weight})
		total += weight
	}
	if len(list) == 0 {
		return 0, false
	}
	slices.SortFunc(list, func(a, b ratio) int {
		if a.r < b.r {
			return -1
		}
		if a.r > b.r {
			return 1
		}
		return 0
	})
	sum := 0.0
	for _, one := range list {
		if sum += one.weight; sum >= total/2 {
			return one.r, true
		}
	}
	return list[len(list)-1].r, true
}
