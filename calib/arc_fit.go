package calib

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// The fit works with columns of order 1: u = l/h, h the band's half width; the
// results are turned into Geometry's parameters at the end. Measured on detector rows
// the model of x is linear in
//
//	x - X_c = p0 + p1 (j - J_c) + p2 u + p3 u^2 + p4 u^3 + p5 q + p6 q^2,
//
// J_c nominal.
const fitParameters = 7

// measurement is a centroid of an identified line.
type measurement struct {
	ArcResidual
	row    [fitParameters]float64 // of the design matrix
	value  float64                // x - X_c
	err2   float64
	line   int
	weight float64 // robust, 0..1
}

// arcFit is weighted least squares with an effect of each line, common to all its
// centroids, of variance lineVar (what the list and unseen neighbours are off by),
// besides each centroid's own error and an error extraVar that the pixels' unequal
// response adds to all. Ignoring the first, thousands of centroids of ten lines would
// claim a tenth of the true error. (Random effects: Laird and Ware 1982, Biometrics
// 38, 963.)
type arcFit struct {
	data     []measurement
	lines    int
	u        []float64 // of each line
	dropped  []bool    // lines that stray
	extraVar float64
	lineVar  float64
	prior    prior
	p        *mat.VecDense
	cov      *mat.SymDense
}

// prior is what is known without a line: loose, so that it speaks only where lines
// do not. Rows of the design, their values and standard deviations.
type prior []priorRow

type priorRow struct {
	row        [fitParameters]float64
	value, dev float64
}

// Standard deviations of the prior. The shape of the dispersion follows from the
// grating: its d2 and d3, scaled with d1, are believed to half a pixel at the band's
// ends.
const (
	priorElement    = 0.01 // relative, of X_e
	priorDispersion = 0.03 // relative, of d1
	priorShapePx    = 0.5  // at the band's ends, of d2 and d3 each
	priorSlant      = 0.03 // px per px
	priorSmile      = 2e-3 // px per px^2
)

// lineFloor is the least error of a line, px: centroids of perfect lines on a grid
// and the lists' digits.
const lineFloor = 0.003

// rejectSigmas: a centroid beyond so many of its errors has no say (biweight), nor has
// a line (strayLines).
const rejectSigmas = 6.0

func newPrior(g *Geometry, half float64) prior {
	e1 := g.D[0] * half
	ratio2, ratio3 := g.D[1]*half/g.D[0], g.D[2]*half*half/g.D[0]
	return prior{
		{[fitParameters]float64{1: 1}, g.X_e, priorElement * math.Abs(g.X_e)},
		{[fitParameters]float64{2: 1}, e1, priorDispersion * math.Abs(e1)},
		{[fitParameters]float64{2: -ratio2, 3: 1}, 0, priorShapePx},
		{[fitParameters]float64{2: -ratio3, 4: 1}, 0, priorShapePx},
		{[fitParameters]float64{5: 1}, g.SlitTilt, priorSlant},
		{[fitParameters]float64{6: 1}, g.Smile, priorSmile},
	}
}

// solve repeats least squares, errors and robust weights until they stand.
func (f *arcFit) solve() bool {
	f.extraVar, f.lineVar = 1e-4, lineFloor*lineFloor
	f.dropped = make([]bool, f.lines)
	for i := range f.data {
		f.data[i].weight = 1
	}
	for range 12 {
		if !f.leastSquares() {
			return false
		}
		f.errors()
	}
	return f.leastSquares()
}

// leastSquares solves the normal equations. With W the weights of a line's n
// centroids, the inverse of diag(1/W) + t 11' is diag(W) - t W11'W/(1 + t sum W).
func (f *arcFit) leastSquares() bool {
	normal, right := mat.NewSymDense(fitParameters, nil), mat.NewVecDense(fitParameters, nil)
	add := func(row *[fitParameters]float64, value, weight float64) {
		for a := range row {
			right.SetVec(a, right.AtVec(a)+weight*row[a]*value)
			for b := a; b < fitParameters; b++ {
				normal.SetSym(a, b, normal.At(a, b)+weight*row[a]*row[b])
			}
		}
	}
	sums := make([]lineSum, f.lines)
	for i := range f.data {
		d := &f.data[i]
		w := f.weightOf(d)
		add(&d.row, d.value, w)
		sums[d.line].add(&d.row, d.value, w)
	}
	for i := range sums {
		if s := &sums[i]; s.weight > 0 {
			add(&s.row, s.value, -f.lineVar/(1+f.lineVar*s.weight))
		}
	}
	for i := range f.prior {
		p := &f.prior[i]
		add(&p.row, p.value, 1/(p.dev*p.dev))
	}
	var chol mat.Cholesky
	if !chol.Factorize(normal) {
		return false
	}
	f.p, f.cov = mat.NewVecDense(fitParameters, nil), mat.NewSymDense(fitParameters, nil)
	return chol.SolveVecTo(f.p, right) == nil && chol.InverseTo(f.cov) == nil
}

// lineSum holds 1'W X and 1'W value of a line.
type lineSum struct {
	row           [fitParameters]float64
	value, weight float64
}

func (s *lineSum) add(row *[fitParameters]float64, value, weight float64) {
	for a, r := range row {
		s.row[a] += weight * r
	}
	s.value += weight * value
	s.weight += weight
}

func (f *arcFit) weightOf(d *measurement) float64 {
	if f.dropped[d.line] {
		return 0
	}
	return d.weight / (d.err2 + f.extraVar)
}

// errors measures the residuals, then extraVar, lineVar and the robust weights by
// them.
func (f *arcFit) errors() {
	mean, variance := f.lineMeans()
	var own, err2 []float64
	for i := range f.data {
		d := &f.data[i]
		if !f.dropped[d.line] {
			own, err2 = append(own, math.Abs(d.ResidualPx-mean[d.line])), append(err2, d.err2)
		}
	}
	f.extraVar = excess(own, err2)
	f.judgeLines(mean, variance)
	for i := range f.data {
		d := &f.data[i]
		d.weight = biweight(d.ResidualPx-mean[d.line], math.Sqrt(d.err2+f.extraVar)*rejectSigmas/6)
	}
}

// judgeLines drops the lines that stray and measures the scatter of the others. It is
// about the fit that they agree on, of lineTerms parameters: too small by as much.
func (f *arcFit) judgeLines(mean, variance []float64) {
	var places []linePlace
	for k, m := range mean {
		if variance[k] > 0 {
			places = append(places, linePlace{line: k, u: f.u[k], mean: m, variance: variance[k]})
		}
	}
	stray, corrected := strayLines(places)
	var sum, own, n float64
	for i, p := range places {
		if f.dropped[p.line] = stray[i]; !stray[i] {
			sum, own, n = sum+corrected[i]*corrected[i], own+p.variance, n+1
		}
	}
	f.lineVar = max(lineFloor*lineFloor, (sum-own)/max(1, n-lineTerms))
}

// lineMeans fills in the residuals and returns their weighted mean for each line,
// with its variance; 0, 0 for a line without weight.
func (f *arcFit) lineMeans() (mean, variance []float64) {
	mean, variance = make([]float64, f.lines), make([]float64, f.lines)
	for i := range f.data {
		d := &f.data[i]
		d.ResidualPx = d.value - dotRow(&d.row, f.p)
		w := d.weight / (d.err2 + f.extraVar)
		mean[d.line] += w * d.ResidualPx
		variance[d.line] += w
	}
	for k, w := range variance {
		if w > 0 {
			mean[k] /= w
			variance[k] = 1 / w
		}
	}
	return mean, variance
}

func dotRow(row *[fitParameters]float64, p *mat.VecDense) float64 {
	sum := 0.0
	for a, r := range row {
		sum += r * p.AtVec(a)
	}
	return sum
}

// excess is the variance that, added to known ones, makes the median of |value| /
// error that of a normal population (the idea of Paule and Mandel 1982, J. Res. NBS
// 87, 377, with a median for their sum of squares, which outliers would rule).
func excess(value, err2 []float64) float64 {
	if len(value) == 0 {
		return 0
	}
	ratio := make([]float64, len(value))
	tooLarge := func(extra float64) bool {
		for i, v := range value {
			ratio[i] = v / math.Sqrt(err2[i]+extra)
		}
		slices.Sort(ratio)
		return madPerSigma*(ratio[(len(ratio)-1)/2]+ratio[len(ratio)/2])/2 > 1
	}
	if !tooLarge(0) {
		return 0
	}
	low, high := 0.0, 1e-8
	for tooLarge(high) && high < 1e6 {
		low, high = high, 4*high
	}
	for range 40 {
		if middle := (low + high) / 2; tooLarge(middle) {
			low = middle
		} else {
			high = middle
		}
	}
	return (low + high) / 2
}
