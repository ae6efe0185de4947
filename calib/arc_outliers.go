package calib

import (
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// lineTerms is the number of the dispersion's parameters that lines, as a whole, are
// fitted by: place, d1, d2, d3.
const lineTerms = 4

// linePlace is the mean residual of a line's centroids.
type linePlace struct {
	line           int
	u              float64 // as in the fit
	mean, variance float64
}

// The search among lines: all sets of lineTerms, or mostSets of them; only with two
// lines more than would leave nothing to compare.
const (
	mostSets       = 5000
	leastForMedian = lineTerms + 3
)

// strayLines tells which lines lie off the dispersion that most of them agree on. A
// line with an unlisted one close to it is off by tenths of a pixel in all its
// thousand centroids alike; least squares would bend the dispersion to it.
//
// The half that agrees best is found by least median of squares (Rousseeuw 1984, J.
// Am. Stat. Assoc. 79, 871), which up to half of the lines cannot mislead, wherever
// they lie. The others then join one by one, the one that the joined predict best
// first, while it lies within rejectSigmas of the prediction's error (forward search:
// Hadi and Simonoff 1993, J. Am. Stat. Assoc. 88, 1264): a line far from the others is
// predicted badly and is heard. corrected are the residuals of the joined lines' fit.
// With few lines none stray.
func strayLines(places []linePlace) (stray []bool, corrected []float64) {
	stray = make([]bool, len(places))
	if len(places) < leastForMedian {
		corrected, _ = predictLines(places, stray)
		return stray, corrected
	}
	half, scale := agreeingHalf(places)
	for i := range stray {
		stray[i] = !half[i]
	}
	for {
		var leverage []float64
		corrected, leverage = predictLines(places, stray)
		next, least := -1, rejectSigmas
		for i, p := range places {
			own := max(scale*scale, p.variance+lineFloor*lineFloor)
			if t := math.Abs(corrected[i]) / math.Sqrt(own*(1+leverage[i])); stray[i] && t < least {
				next, least = i, t
			}
		}
		if next < 0 {
			return stray, corrected
		}
		stray[next] = false
	}
}

// agreeingHalf is the set of lines within the least median of squares, with
// Rousseeuw's scale, corrected for few lines.
func agreeingHalf(places []linePlace) (half []bool, scale float64) {
	best, order := math.Inf(1), (len(places)+lineTerms+1)/2
	half = make([]bool, len(places))
	squares, sorted := make([]float64, len(places)), make([]float64, len(places))
	eachSet(len(places), func(set [lineTerms]int) {
		c, ok := cubicThrough(places, set)
		if !ok {
			return
		}
		for i, p := range places {
			r := p.mean - c.at(p.u)
			squares[i] = r * r
		}
		copy(sorted, squares)
		slices.Sort(sorted)
		if m := sorted[order-1]; m < best {
			best = m
			for i, s := range squares {
				half[i] = s <= m
			}
		}
	})
	return half, madPerSigma * (1 + 5/float64(len(places)-lineTerms)) * math.Sqrt(best)
}

// predictLines fits a cubic to the lines that do not stray, all alike, and returns the
// residuals of all and the variance of their prediction over that of a line.
func predictLines(places []linePlace, stray []bool) (residuals, leverage []float64) {
	residuals, leverage = make([]float64, len(places)), make([]float64, len(places))
	normal, right := mat.NewSymDense(lineTerms, nil), mat.NewVecDense(lineTerms, nil)
	rows := make([]*mat.VecDense, len(places))
	for i, p := range places {
		rows[i] = mat.NewVecDense(lineTerms, []float64{1, p.u, p.u * p.u, p.u * p.u * p.u})
		if !stray[i] {
			normal.SymRankOne(normal, 1, rows[i])
			right.AddScaledVec(right, p.mean, rows[i])
		}
	}
	var chol mat.Cholesky
	c := mat.NewVecDense(lineTerms, nil)
	if !chol.Factorize(normal) || chol.SolveVecTo(c, right) != nil {
		// Fewer than four lines: what they are off by is all there is.
		for i, p := range places {
			residuals[i] = p.mean
		}
		return residuals, leverage
	}
	solved := mat.NewVecDense(lineTerms, nil)
	for i, p := range places {
		residuals[i] = p.mean - mat.Dot(rows[i], c)
		if chol.SolveVecTo(solved, rows[i]) == nil {
			leverage[i] = mat.Dot(rows[i], solved)
		}
	}
	return residuals, leverage
}

// eachSet visits all sets of lineTerms of n, or mostSets drawn from a fixed seed.
func eachSet(n int, visit func([lineTerms]int)) {
	if n*(n-1)/2*(n-2)/3*(n-3)/4 <= mostSets {
		for a := range n {
			for b := a + 1; b < n; b++ {
				for c := b + 1; c < n; c++ {
					for d := c + 1; d < n; d++ {
						visit([lineTerms]int{a, b, c, d})
					}
				}
			}
		}
		return
	}
	random := rand.New(rand.NewPCG(1, 2))
	for range mostSets {
		p := random.Perm(n)
		visit([lineTerms]int{p[0], p[1], p[2], p[3]})
	}
}

// cubic is Newton's form of the cubic through four points.
type cubic struct{ u, c [lineTerms]float64 }

// cubicThrough passes a cubic through four lines by divided differences; ok is false
// where two of them lie together.
func cubicThrough(places []linePlace, set [lineTerms]int) (f cubic, ok bool) {
	for i, k := range set {
		f.u[i], f.c[i] = places[k].u, places[k].mean
	}
	for order := 1; order < lineTerms; order++ {
		for i := lineTerms - 1; i >= order; i-- {
			d := f.u[i] - f.u[i-order]
			if d == 0 {
				return f, false
			}
			f.c[i] = (f.c[i] - f.c[i-1]) / d
		}
	}
	return f, true
}

func (f *cubic) at(u float64) float64 {
	v := f.c[lineTerms-1]
	for i := lineTerms - 2; i >= 0; i-- {
		v = f.c[i] + (u-f.u[i])*v
	}
	return v
}
