package calib

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// TraceSolution is the trace common to all elements and rows.
type TraceSolution struct {
	TraceTilt, TraceCurve float64
	// Covariance of the two, in this order.
	Covariance *mat.SymDense
	// RMSPx is the rms of the points kept, Used of them; Rejected stood out.
	RMSPx          float64
	Used, Rejected int
	// FirstX and LastX bound the points used.
	FirstX, LastX float64
	// OffsetPx is how far the ends lie from their nominal rows at x = X_c, in the mean;
	// PlateScale how far apart they lie, over nominal (NaN where all ends are one).
	// These are checks: rows are labelled by the nominal ones.
	OffsetPx, OffsetErr       float64
	PlateScale, PlateScaleErr float64
}

// ErrorPx is the standard error of the trace's shift at x, px.
func (s *TraceSolution) ErrorPx(g *Geometry, x float64) float64 {
	d := x - g.X_c
	v := mat.NewVecDense(2, []float64{d, d * d})
	return math.Sqrt(max(0, mat.Inner(v, s.Covariance, v)))
}

// TraceError is returned where no end of lit rows is on the detector, or the points do
// not fix the trace: the caller keeps the nominal one and flags NOMINALWAVE.
type TraceError struct{ What string }

func (e *TraceError) Error() string { return "trace: " + e.What }

// leastTracePoints, over at least leastTraceSpan of the columns that the points could
// span from end to end, fix a parabola.
const (
	leastTracePoints = 8
	leastTraceSpan   = 0.3
)

// traceFloor is added to the points' errors, px: pixels of unequal response, about
// 1 % over the few rows of an edge.
const traceFloor = 0.01

// FitTrace fits y = constant of the group + TraceTilt (x-X_c) + TraceCurve (x-X_c)^2 to
// the points of all groups, by least squares repeated with the biweight. columns is
// the detector's width. Errors from the data are *TraceError.
func FitTrace(nominal Geometry, points []EdgePoint, columns int) (*TraceSolution, error) {
	f, err := newTraceFit(&nominal, points, columns)
	if err != nil {
		return nil, err
	}
	// Least squares would start from what one outlier says; nominal is off by 2.5 px.
	scale := math.Inf(1)
	for range 10 {
		if !f.leastSquares(scale) {
			return nil, &TraceError{What: fmt.Sprintf("%d points of the rows' ends do not fix it", len(points))}
		}
		scale = f.scatter()
	}
	return f.solution(&nominal, scale), nil
}

// traceFit: u = (x - X_c)/half, half the detector's width; parameters tilt, curve and
// then the groups' constants.
type traceFit struct {
	points []EdgePoint
	group  []int // of each point, from 0
	groups int
	u      []float64
	half   float64
	weight []float64
	p      *mat.VecDense
	cov    *mat.SymDense
}

func newTraceFit(g *Geometry, points []EdgePoint, columns int) (*traceFit, error) {
	if len(points) == 0 {
		return nil, &TraceError{What: "no end of the lit rows is seen on the detector"}
	}
	f := &traceFit{points: points, half: float64(columns) / 2, weight: make([]float64, len(points))}
	number := map[int]int{}
	low, high := math.Inf(1), math.Inf(-1)
	for _, p := range points {
		k, ok := number[p.Group]
		if !ok {
			k = f.groups
			number[p.Group] = k
			f.groups++
		}
		f.group = append(f.group, k)
		f.u = append(f.u, (p.X-g.X_c)/f.half)
		low, high = min(low, p.X), max(high, p.X)
	}
	if len(points) < leastTracePoints+f.groups || high-low < leastTraceSpan*float64(columns) {
		return nil, &TraceError{What: fmt.Sprintf("the ends of the lit rows are seen at %d places from column %.0f to %.0f, too few or too near for a parabola", len(points), low, high)}
	}
	return f, nil
}

func (f *traceFit) leastSquares(scale float64) bool {
	n := 2 + f.groups
	normal, right := mat.NewSymDense(n, nil), mat.NewVecDense(n, nil)
	for i := range f.points {
		p := &f.points[i]
		f.weight[i] = 1
		if !math.IsInf(scale, 0) {
			f.weight[i] = biweight(f.residual(i)/f.err(i), scale)
		}
		w := f.weight[i] / (f.err(i) * f.err(i))
		at := [3]int{0, 1, 2 + f.group[i]}
		row := [3]float64{f.u[i], f.u[i] * f.u[i], 1}
		for a := range row {
			right.SetVec(at[a], right.AtVec(at[a])+w*row[a]*p.Y)
			for b := a; b < len(row); b++ {
				normal.SetSym(at[a], at[b], normal.At(at[a], at[b])+w*row[a]*row[b])
			}
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(normal) {
		return false
	}
	f.p, f.cov = mat.NewVecDense(n, nil), mat.NewSymDense(n, nil)
	return chol.SolveVecTo(f.p, right) == nil && chol.InverseTo(f.cov) == nil
}

func (f *traceFit) err(i int) float64 { return math.Hypot(f.points[i].YErr, traceFloor) }

func (f *traceFit) residual(i int) float64 {
	u := f.u[i]
	return f.points[i].Y - u*(f.p.AtVec(0)+u*f.p.AtVec(1)) - f.p.AtVec(2+f.group[i])
}

// scatter is the robust scatter of residual/error, at least 1.
func (f *traceFit) scatter() float64 {
	d := make([]float64, len(f.points))
	for i := range d {
		d[i] = math.Abs(f.residual(i)) / f.err(i)
	}
	slices.Sort(d)
	return max(1, madPerSigma*(d[(len(d)-1)/2]+d[len(d)/2])/2)
}

func (f *traceFit) solution(g *Geometry, scale float64) *TraceSolution {
	h := f.half
	s := &TraceSolution{TraceTilt: f.p.AtVec(0) / h, TraceCurve: f.p.AtVec(1) / (h * h), FirstX: math.Inf(1), LastX: math.Inf(-1)}
	var scaled mat.SymDense
	scaled.ScaleSym(scale*scale, f.cov)
	s.Covariance = mat.NewSymDense(2, []float64{scaled.At(0, 0) / (h * h), scaled.At(0, 1) / (h * h * h), 0, scaled.At(1, 1) / (h * h * h * h)})
	sum := 0.0
	for i := range f.points {
		if f.weight[i] < keptWeight {
			s.Rejected++
			continue
		}
		s.Used++
		sum += f.residual(i) * f.residual(i)
		s.FirstX, s.LastX = min(s.FirstX, f.points[i].X), max(s.LastX, f.points[i].X)
	}
	s.RMSPx = math.Sqrt(sum / float64(s.Used))
	f.checks(s, g, &scaled)
	return s
}

// checks fits the groups' constants by offset + scale (nominal - Y_c).
func (f *traceFit) checks(s *TraceSolution, g *Geometry, cov *mat.SymDense) {
	nominal := make([]float64, f.groups)
	for i := range f.points {
		nominal[f.group[i]] = f.points[i].Nominal - g.Y_c
	}
	var w, wn, wnn, wy, wny float64
	for k, n := range nominal {
		c, weight := f.p.AtVec(2+k), 1/cov.At(2+k, 2+k)
		w, wn, wnn = w+weight, wn+weight*n, wnn+weight*n*n
		wy, wny = wy+weight*(c-g.Y_c), wny+weight*n*(c-g.Y_c)
	}
	s.OffsetPx, s.OffsetErr = (wy-wn)/w, math.Sqrt(1/w)
	s.PlateScale, s.PlateScaleErr = math.NaN(), math.NaN()
	if det := w*wnn - wn*wn; det > 1e-6*w*wnn && f.groups > 1 {
		s.PlateScale, s.PlateScaleErr = (w*wny-wn*wy)/det, math.Sqrt(w/det)
	}
}
