package calib

// Fill replaces the values of bad pixels along a row by interpolation between good
// ones, so that a voxel they barely reach takes no harm. Plan it once for a row's
// flags, then apply it to the values and variances of every element. The zero value
// is ready; reuse one from row to row.
//
// A single bad pixel is interpolated by Lagrange's polynomial through four good
// pixels on each side: for a line of FWHM 3 px it errs by at most 5 % of the
// peak, of which less than a tenth (reachLimit) enters a voxel that is not voided.
// Wider gaps fall back to two pixels a side, then one, and so does a pixel whose
// polynomial would amplify the noise. Beyond the last good pixel its value is
// repeated; a row without any gets zeros.
type Fill struct {
	patches []patch
}

// A patch is one bad column and the good columns and weights that replace it.
type patch struct {
	column, sources int
	source          [2 * fillSide]int
	weight          [2 * fillSide]float32
}

const (
	fillSide = 4 // good pixels on each side, at most

	// fillNoise is the largest sum of squared weights, the variance of the filled
	// value in units of a neighbour's: a clean single gap has 1.63.
	fillNoise = 2.0
)

// Plan prepares for a row whose pixels with any bit of mask are bad. flags is not
// kept.
func (f *Fill) Plan(flags []Flag, mask Flag) {
	f.patches = f.patches[:0]
	for x, b := range flags {
		if b&mask != 0 {
			f.patches = append(f.patches, newPatch(flags, mask, x))
		}
	}
}

// Signal replaces the bad pixels of a row of values, in place.
func (f *Fill) Signal(row []float32) {
	for i := range f.patches {
		p := &f.patches[i]
		sum := float32(0)
		for k, x := range p.source[:p.sources] {
			sum += p.weight[k] * row[x]
		}
		row[p.column] = sum
	}
}

// Variance replaces the variances of the bad pixels of a row by those of the filled
// values, in place: sum w^2 var. A filled value is not independent of its
// neighbours, which sum w^2 var of a voxel leaves out: by that the variance of a
// voxel next to the voided ones is off by 15 % at most (single bad pixel, voxels of
// 1 px).
func (f *Fill) Variance(row []float32) {
	for i := range f.patches {
		p := &f.patches[i]
		sum := float32(0)
		for k, x := range p.source[:p.sources] {
			sum += p.weight[k] * p.weight[k] * row[x]
		}
		row[p.column] = sum
	}
}

func newPatch(flags []Flag, mask Flag, x int) patch {
	var before, after [fillSide]int
	nBefore := nearest(&before, flags, mask, x, -1)
	nAfter := nearest(&after, flags, mask, x, +1)
	p := patch{column: x}
	switch {
	case nBefore == 0 && nAfter == 0:
		return p
	case nBefore == 0:
		p.sources, p.source[0], p.weight[0] = 1, after[0], 1
		return p
	case nAfter == 0:
		p.sources, p.source[0], p.weight[0] = 1, before[0], 1
		return p
	}
	gap := after[0] - before[0] - 1
	for side := min(nBefore, nAfter); side > 1; side /= 2 {
		if gap > 6-side || after[side-1]-before[side-1] > 4*side {
			continue
		}
		if p.interpolate(before[:side], after[:side]) <= fillNoise {
			return p
		}
	}
	p.interpolate(before[:1], after[:1])
	return p
}

// nearest finds the good columns on one side of x, nearest first, and how many.
func nearest(found *[fillSide]int, flags []Flag, mask Flag, x, step int) int {
	n := 0
	for i := x + step; i >= 0 && i < len(flags) && n < fillSide; i += step {
		if flags[i]&mask == 0 {
			found[n] = i
			n++
		}
	}
	return n
}

// interpolate sets the weights of Lagrange's polynomial through the given columns
// and returns the sum of their squares.
func (p *patch) interpolate(before, after []int) float32 {
	p.sources = copy(p.source[:], before)
	p.sources += copy(p.source[p.sources:], after)
	noise := float32(0)
	for k, a := range p.source[:p.sources] {
		w := 1.0
		for j, b := range p.source[:p.sources] {
			if j != k {
				w *= float64(p.column-b) / float64(a-b)
			}
		}
		p.weight[k] = float32(w)
		noise += p.weight[k] * p.weight[k]
	}
	return noise
}
