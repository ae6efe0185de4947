package calib

import "math"

// share is a part of a row's regressor in an unknown of the whole fit.
type share struct {
	unknown int
	factor  float64
}

// AddRow adds a row.
func (f *LeakFit) AddRow(row LeakRow) {
	regressors, shares := f.regressors(&row)
	use, clipped := usablePixels(f.rule.Clip, row.Term, row.Variance, row.Flags, regressors[0])
	f.clips += clipped
	weights := smoothWeights(row.Variance, use)
	m := len(regressors)
	normal, right := make([]float64, m*m), make([]float64, m)
	at := make([]float64, m)
	for x, ok := range use {
		if !ok {
			continue
		}
		w, t := weights[x], float64(row.Term[x])
		f.square += w * t * t
		f.light += w * regressors[0][x] * regressors[0][x]
		f.pixels++
		for i := range at {
			at[i] = regressors[i][x]
		}
		for i, v := range at {
			wv := w * v
			if wv == 0 {
				continue
			}
			right[i] += wv * t
			for k := i; k < m; k++ {
				normal[i*m+k] += wv * at[k]
			}
		}
	}
	f.spread(normal, right, shares)
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

// addField adds the light of the elements and of the mirrors beyond.
func (f *LeakFit) addField(row *LeakRow, r [][]float64, add func(...share) []float64) {
	along := f.along(row.Y)
	structure := make([][]float64, f.rule.Orders+1)
	for a := range structure {
		var list []share
		for b := range f.rule.Orders + 1 {
			switch {
			case a > 0:
				list = append(list, share{f.structureAt(a, b), along[b]})
			case b > 0:
				list = append(list, share{f.structureAt(a, b), along[b] - f.rowMean[b]})
			}
		}
		structure[a] = add(list...)
	}
	for j, light := range row.Light {
		f.addMirrors(r, row.Y, float64(j), 1, light, func(x int, v float64) {
			for a, s := range structure {
				s[x] += v * f.across[a][j]
			}
		})
	}
	for side, width := range []float64{row.Before, row.After} {
		if width <= 0 {
			continue
		}
		var list []share
		for b := range f.rule.BeyondOrder + 1 {
			list = append(list, share{f.beyondAt() + side*(f.rule.BeyondOrder+1) + b, along[b]})
		}
		f.addBeyond(r, row, width, side, add(list...))
	}
}

// addMirrors adds weight light l^k to the colours' sums for mirrors at place j, and
// hands weight light E(l) to each.
func (f *LeakFit) addMirrors(r [][]float64, y int, j, weight float64, light []float32, each func(x int, v float64)) {
	start := f.table.start(&f.frame.Geometry, float64(y), j)
	for x, v := range light {
		l, ok := f.table.at(start + float64(x))
		if !ok || v == 0 {
			continue
		}
		value := weight * float64(v)
		each(x, value*f.shapeAt(l))
		for k := range f.colours() {
			r[k][x] += value
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

// addBeyond adds mirrors outside the field, width elements wide, below (side 0) or
// above it: the mean of the elements at that end, each shifted to their place.
func (f *LeakFit) addBeyond(r [][]float64, row *LeakRow, width float64, side int, sum []float64) {
	n := min(endElements, f.frame.Elements)
	out := float64(2*side - 1)
	end := float64(side * (f.frame.Elements - 1))
	beyond := make([]float32, f.frame.Columns)
	for done := 0.0; done < width; done++ {
		part := min(1, width-done)
		away := done + 0.5 + part/2 // of their middle from the end element's
		clear(beyond)
		for m := range n {
			from := m + side*(f.frame.Elements-1-2*m)
			addShifted(beyond, row.Light[from], -out*(away+float64(m))*f.frame.Geometry.X_e, 1/float64(n))
		}
		f.addMirrors(r, row.Y, end+out*away, part, beyond, func(x int, v float64) { sum[x] += v })
	}
}

// priors are the variances of the unknowns, 0 where nothing is known before. e0 is e
// at L_c, roughly.
func (f *LeakFit) priors(e0 float64) []float64 {
	all := make([]float64, f.unknowns())
	// Structure shrinks with the order as that of a smooth field.
	size := func(a, b int) float64 { return 1 / (1 + float64(a*a+b*b)) }
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
				all[f.structureAt(a, b)] = math.Pow(f.rule.Structure*e0, 2) * size(a, b) / sum
			}
		}
	}
	sum = 0
	for b := range f.rule.BeyondOrder + 1 {
		sum += size(0, b)
	}
	for side := range 2 {
		for b := range f.rule.BeyondOrder + 1 {
			all[f.beyondAt()+side*(f.rule.BeyondOrder+1)+b] = math.Pow(f.rule.Beyond*e0, 2) * size(0, b) / sum
		}
	}
	for block := range f.blocks {
		for a, sigma := range f.frame.LevelSigma {
			all[f.blocksAt()+block*len(f.frame.LevelSigma)+a] = sigma * sigma * float64(f.frame.LevelRows) / float64(f.blockRows)
		}
	}
	return all
}
