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

// strayLines tells which lines lie off the dispersion that most of them agree on: by
// least median of squares (Rousseeuw 1984, J. Am. Stat. Assoc. 79, 871), which up to
// half of the lines cannot mislead, wherever they lie. A line with an unlisted one
// close to it is off by tenths of a pixel in all its thousand centroids alike; least
// squares would bend the dispersion to it. scatter is that of the others, free of
// their own errors as far as a median tells. With few lines none stray.
func strayLines(places []linePlace) (stray []bool, corrected []float64) {
	stray, corrected = make([]bool, len(places)), make([]float64, len(places))
	for i, p := range places {
		corrected[i] = p.mean
	}
	if len(places) < leastForMedian {
		return stray, corrected
	}
	best, order := math.Inf(1), (len(places)+lineTerms+1)/2
	var bestFit [lineTerms]float64
	squares := make([]float64, len(places))
	eachSet(len(places), func(set [lineTerms]int) {
		c, ok := cubicThrough(places, set)
		if !ok {
			return
		}
		for i, p := range places {
			r := p.mean - cubicAt(c, p.u)
			squares[i] = r * r
		}
		slices.Sort(squares)
		if m := squares[order-1]; m < best {
			best, bestFit = m, c
		}
	})
	// Rousseeuw's scale with its correction for few lines.
	scale := madPerSigma * (1 + 5/float64(len(places)-lineTerms)) * math.Sqrt(best)
	for i, p := range places {
		corrected[i] = p.mean - cubicAt(bestFit, p.u)
		limit := max(3*scale, rejectSigmas*math.Sqrt(p.variance+lineFloor*lineFloor))
		stray[i] = math.Abs(corrected[i]) > limit
	}
	return stray, corrected
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

// cubicThrough passes a cubic through four lines; ok is false where two of them are
// so close that it would be wild.
func cubicThrough(places []linePlace, set [lineTerms]int) (c [lineTerms]float64, ok bool) {
	m, right := mat.NewDense(lineTerms, lineTerms, nil), mat.NewVecDense(lineTerms, nil)
	for i, k := range set {
		power := 1.0
		for a := range lineTerms {
			m.Set(i, a, power)
			power *= places[k].u
		}
		right.SetVec(i, places[k].mean)
	}
	var solved mat.VecDense
	if solved.SolveVec(m, right) != nil {
		return c, false
	}
	for a := range c {
		c[a] = solved.AtVec(a)
	}
	return c, true
}

func cubicAt(c [lineTerms]float64, u float64) float64 {
	return c[0] + u*(c[1]+u*(c[2]+u*c[3]))
}
