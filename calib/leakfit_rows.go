package calib

import "math"

// share is a part of a row's regressor in an unknown of the whole fit.
type share struct {
	unknown int
	factor  float64
}

// LeakSums are what a row adds to a LeakFit.
type LeakSums struct {
	normal, right []float64 // of the row's regressors
	shares        [][]share
	square, light float64
	pixels, clips int
}

// AddRow adds a row.
func (f *LeakFit) AddRow(row LeakRow) { f.Add(f.Row(row)) }

// Row is what a row is going to add. Any number of goroutines may gather rows at once.
func (f *LeakFit) Row(row LeakRow) *LeakSums {
	regressors, shares := f.regressors(&row)
	use, clipped := usablePixels(f.rule.Clip, row.Term, row.Variance, row.Flags, regressors[0])
	f.blind(&row, use)
	weights := smoothWeights(row.Variance, use)
	m := len(regressors)
	s := &LeakSums{normal: make([]float64, m*m), right: make([]float64, m), shares: shares, clips: clipped}
	at := make([]float64, m)
	for x, ok := range use {
		if !ok {
			continue
		}
		w, t := weights[x], float64(row.Term[x])
		s.square += w * t * t
		s.light += w * regressors[0][x] * regressors[0][x]
		s.pixels++
		for i := range at {
			at[i] = regressors[i][x]
		}
		for i, v := range at {
			wv := w * v
			if wv == 0 {
				continue
			}
			s.right[i] += wv * t
			for k, u := range at[i:] {
				s.normal[i*m+i+k] += wv * u
			}
		}
	}
	return s
}

// Add adds the sums of a row.
func (f *LeakFit) Add(s *LeakSums) {
	f.clips += s.clips
	f.square += s.square
	f.light += s.light
	f.pixels += s.pixels
	f.spread(s.normal, s.right, s.shares)
}

// spread adds a row's sums to those of the unknowns.
func (f *LeakFit) spread(normal, right []float64, shares [][]share) {
	m := len(right)
	for i, list := range shares {
		for _, u := range list {
			f.right[u.unknown] += u.factor * right[i]
		}
		for k, other := range shares {
			v := normal[min(i, k)*m+max(i, k)]
			if v == 0 {
				continue
			}
			for _, a := range list {
				for _, b := range other {
					if a.unknown <= b.unknown {
						f.normal.SetSym(a.unknown, b.unknown, f.normal.At(a.unknown, b.unknown)+a.factor*b.factor*v)
					}
				}
			}
		}
	}
}

// regressors are sums over the mirrors in each pixel of a row, the first without the
// levels, and the unknowns to which each belongs.
func (f *LeakFit) regressors(row *LeakRow) (r [][]float64, shares [][]share) {
	add := func(list ...share) []float64 {
		r, shares = append(r, make([]float64, f.frame.Columns)), append(shares, list)
		return r[len(r)-1]
	}
	for k := range f.colours() {
		add(share{k, 1})
	}
	if row.Light != nil {
		f.addField(row, r, add)
	}
	block := row.Y / f.blockRows
	for a := range f.frame.LevelSigma {
		found := false
		for _, own := range row.Amplifier {
			found = found || int(own) == a
		}
		if !found {
			continue
		}
		level := add(share{f.levelAt() + a, 1}, share{f.blocksAt() + block*len(f.frame.LevelSigma) + a, 1})
		for x, own := range row.Amplifier {
			if int(own) == a {
				level[x] = 1
			}
		}
	}
	return r, shares
}

// mirrorSums are sums over mirrors at each column, side by side: those of the colours, of
// the structure's orders across the field, and of the mirrors beyond either side.
type mirrorSums struct {
	sums                       []float64 // [column][width]
	width, structures, beyonds int
}

func (f *LeakFit) newMirrorSums() *mirrorSums {
	s := &mirrorSums{structures: f.colours()}
	s.beyonds = s.structures + f.rule.Orders + 1
	s.width = s.beyonds + 2
	s.sums = make([]float64, s.width*f.frame.Columns)
	return s
}

// take copies sum i out.
func (s *mirrorSums) take(dst []float64, i int) {
	for x := range dst {
		dst[x] = s.sums[x*s.width+i]
	}
}

// addField adds the light of the elements and of the mirrors beyond.
func (f *LeakFit) addField(row *LeakRow, r [][]float64, add func(...share) []float64) {
	along := f.along(row.Y)
	sums := f.newMirrorSums()
	orders := make([]float64, f.rule.Orders+1)
	for j, light := range row.Light {
		for a := range orders {
			orders[a] = f.across[a][j]
		}
		f.addMirrors(sums, row.Y, float64(j), light, sums.structures, orders)
	}
	for a := range orders {
		var list []share
		for b := range f.rule.Orders + 1 {
			switch {
			case a > 0:
				list = append(list, share{f.structureAt(a, b), along[b]})
			case b > 0:
				list = append(list, share{f.structureAt(a, b), along[b] - f.rowMean[b]})
			}
		}
		sums.take(add(list...), sums.structures+a)
	}
	for side, width := range [][]float64{row.Before, row.After} {
		if !(most(width) > 0) {
			continue
		}
		var list []share
		for b := range f.rule.BeyondOrder + 1 {
			list = append(list, share{f.beyondAt() + side*(f.rule.BeyondOrder+1) + b, along[b]})
		}
		f.addBeyond(sums, row, width, side)
		sums.take(add(list...), sums.beyonds+side)
	}
	for k := range f.colours() {
		sums.take(r[k], k)
	}
}

// addMirrors adds light l^k to the colours' sums for mirrors at place j, and light E(l)
// times factors to the sums from index at on.
func (f *LeakFit) addMirrors(s *mirrorSums, y int, j float64, light []float32, at int, factors []float64) {
	start := f.table.start(&f.frame.Geometry, float64(y), j)
	for x, v := range light {
		l, ok := f.table.at(start + float64(x))
		if !ok || v == 0 {
			continue
		}
		sums := s.sums[x*s.width:][:s.width]
		value := float64(v)
		shaped := value * f.shapeAt(l)
		own := sums[at:][:len(factors)]
		for a, factor := range factors {
			own[a] += shaped * factor
		}
		for k := range sums[:s.structures] {
			sums[k] += value
			value *= l
		}
	}
}

// shapeAt is E at l/colourScaleNM.
func (f *LeakFit) shapeAt(l float64) float64 {
	if f.shape == nil {
		return 1
	}
	value, power := 0.0, 1.0
	for _, c := range f.shape.Coef {
		value += c * power
		power *= l * colourScaleNM
	}
	return max(value/f.shape.Coef[0], 0)
}

// most is the largest number, 0 of none.
func most(list []float64) float64 {
	top := 0.0
	for _, v := range list {
		top = max(top, v)
	}
	return top
}

// addBeyond adds mirrors outside the field, width elements wide at each column, below
// (side 0) or above it: the mean of the elements at that end, each shifted to their
// place.
func (f *LeakFit) addBeyond(s *mirrorSums, row *LeakRow, width []float64, side int) {
	n := min(endElements, f.frame.Elements)
	out := float64(2*side - 1)
	end := float64(side * (f.frame.Elements - 1))
	beyond := make([]float32, f.frame.Columns)
	for done, top := 0.0, most(width); done < top; done++ {
		away := done + 0.5 + min(1, top-done)/2 // of their middle from the end element's
		clear(beyond)
		for m := range n {
			addShifted(beyond, row.Light[f.endElement(side, m)], -out*(away+float64(m))*f.frame.Geometry.X_e, 1/float64(n))
		}
		for x := range beyond {
			beyond[x] *= float32(min(1, max(0, width[x]-done)))
		}
		f.addMirrors(s, row.Y, end+out*away, beyond, s.beyonds+side, []float64{1})
	}
}

// endElement is the element m places from the end at a side.
func (f *LeakFit) endElement(side, m int) int { return m + side*(f.frame.Elements-1-2*m) }

// edgeColumns at each end of the detector tell whether light goes on beyond it, edgeLit
// how much of the row's mean is light: well above the noise of so few pixels, and too
// little to matter.
const (
	edgeColumns = 4
	edgeLit     = 0.05
)

// blind leaves out pixels for which addBeyond would have to look past the detector's
// end, where the end elements' light goes on.
func (f *LeakFit) blind(row *LeakRow, use []bool) {
	if row.Light == nil {
		return
	}
	n := min(endElements, f.frame.Elements)
	for side, width := range [][]float64{row.Before, row.After} {
		top := most(width)
		if !(top > 0) {
			continue
		}
		reach := min(int(math.Ceil((top+0.5+float64(n))*math.Abs(f.frame.Geometry.X_e))), len(use))
		dark := use[len(use)-reach:]
		if side == 1 == (f.frame.Geometry.X_e > 0) { // they look towards lower x
			dark = use[:reach]
		}
		if f.lightGoesOn(row, side, n, &dark[0] == &use[0]) {
			clear(dark)
		}
	}
}

// lightGoesOn tells whether n elements at a side are lit at the detector's first (low) or
// last columns.
func (f *LeakFit) lightGoesOn(row *LeakRow, side, n int, low bool) bool {
	edge, whole := 0.0, 0.0
	for m := range n {
		light := row.Light[f.endElement(side, m)]
		columns := min(edgeColumns, len(light))
		from := len(light) - columns
		if low {
			from = 0
		}
		for _, v := range light[from : from+columns] {
			edge += float64(v) / float64(columns)
		}
		for _, v := range light {
			whole += float64(v) / float64(len(light))
		}
	}
	return edge > edgeLit*whole
}

// sizes are those that LeakRule lists, structure and beyond in the units of e.
type sizes struct{ structure, beyond, fall float64 }

// priors are the variances of the unknowns, 0 where nothing is known before.
func (f *LeakFit) priors(s sizes) []float64 {
	all := make([]float64, f.unknowns())
	size := func(a, b int) float64 { return math.Pow(1+float64(a*a+b*b), -s.fall) }
	sum := 0.0
	for a := range f.rule.Orders + 1 {
		for b := range f.rule.Orders + 1 {
			if a+b > 0 {
				sum += size(a, b)
			}
		}
	}
	for a := range f.rule.Orders + 1 {
		for b := range f.rule.Orders + 1 {
			if a+b > 0 {
				all[f.structureAt(a, b)] = s.structure * s.structure * size(a, b) / sum
			}
		}
	}
	sum = 0
	for b := range f.rule.BeyondOrder + 1 {
		sum += size(0, b)
	}
	for side := range 2 {
		for b := range f.rule.BeyondOrder + 1 {
			all[f.beyondAt()+side*(f.rule.BeyondOrder+1)+b] = s.beyond * s.beyond * size(0, b) / sum
		}
	}
	for block := range f.blocks {
		for a, sigma := range f.frame.LevelSigma {
			all[f.blocksAt()+block*len(f.frame.LevelSigma)+a] = sigma * sigma * float64(f.frame.LevelRows) / float64(f.blockRows)
		}
	}
	return all
}
