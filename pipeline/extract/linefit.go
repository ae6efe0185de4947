package extract

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/calib/physics"
)

// LineOptions say which lines are fitted, and how.
type LineOptions struct {
	// RestNM are the lines' vacuum wavelengths at rest.
	RestNM []float64
	// Free gives each line a velocity and a width of its own; else all share them.
	Free bool
	// WindowNM is how far the fit reaches on both sides of the outer lines.
	WindowNM float64
	// VelocityKmS is the middle of the range that is searched, RangeKmS its half width.
	VelocityKmS, RangeKmS float64
	// MinSN is the S/N of a line's flux below which its velocity and width are not
	// given.
	MinSN float64
}

// Defaults of LineOptions.
const (
	DefaultWindowVoxels = 12
	DefaultRangeKmS     = 500
	DefaultMinSN        = 5
)

// lightKmS is the speed of light (exact, SI).
const lightKmS = 299792.458

// fwhmPerSigma is 2 sqrt(2 ln 2).
const fwhmPerSigma = 2.3548200450309493

// continuumTerms of the polynomial under the lines.
const continuumTerms = 2

// startSigma, in voxels, is the width at which the search begins: that of a profile
// of 3.3 px.
const startSigma = 1.4

// Line is a fitted line.
type Line struct {
	RestNM float64
	// Flux is the line's sum, in the band's unit; Velocity in km/s; Width the FWHM as
	// observed, that of the instrument included, in km/s.
	Flux, FluxErr, FluxNaiveErr float64
	Velocity, VelocityErr       float64
	Width, WidthErr             float64
}

// Status tells whether a fit can be used.
type Status int16

// What became of a fit.
const (
	Fitted      Status = 0
	NoData      Status = 1 // too few good voxels
	NotSettled  Status = 2 // the fit did not settle, or ran out of its range
	BelowMinSN  Status = 4 // some line is too faint for velocity and width
	statusWords        = "0 fitted, 1 too few voxels, 2 not settled, 4 a line below the S/N asked for"
)

// lineModel fits Gaussians, integrated over the voxels, on a straight continuum.
type lineModel struct {
	o      *LineOptions
	edges  []float64 // nm, one more than channels
	widths []float64 // of the channels where values are densities, else 1
	middle float64   // of the window, nm
	half   float64
	sigma0 float64 // nm
}

// shapes is the number of velocities, which is that of widths.
func (m *lineModel) shapes() int {
	if m.o.Free {
		return len(m.o.RestNM)
	}
	return 1
}

func (m *lineModel) shapeOf(line int) int { return min(line, m.shapes()-1) }

// The parameters: velocities km/s, widths nm, fluxes, continuum.
func (m *lineModel) parameters() int { return 2*m.shapes() + len(m.o.RestNM) + continuumTerms }

func (m *lineModel) fluxAt(line int) int { return 2*m.shapes() + line }

// eval gives the model and, where not nil, its derivatives [channel][parameter].
func (m *lineModel) eval(p, value []float64, slope *mat.Dense) {
	shapes := m.shapes()
	for l := range value {
		a, b := m.edges[l], m.edges[l+1]
		value[l] = 0
		for line, rest := range m.o.RestNM {
			s := m.shapeOf(line)
			velocity, sigma, flux := p[s], p[shapes+s], p[m.fluxAt(line)]
			center := rest * physics.DopplerFactor(velocity)
			ua, ub := (a-center)/sigma, (b-center)/sigma
			part := math.Abs(normal(ub)-normal(ua)) / m.widths[l]
			value[l] += flux * part
			if slope == nil {
				continue
			}
			sign := math.Copysign(1, b-a)
			da, db := density(ua), density(ub)
			slope.Set(l, m.fluxAt(line), part)
			perNM := -flux * sign * (db - da) / sigma / m.widths[l]
			slope.Set(l, s, slope.At(l, s)+perNM*center/lightKmS)
			slope.Set(l, shapes+s, slope.At(l, shapes+s)-flux*sign*(ub*db-ua*da)/sigma/m.widths[l])
		}
		t := ((a+b)/2 - m.middle) / m.half
		at, power := m.fluxAt(len(m.o.RestNM)), 1.0
		for e := range continuumTerms {
			value[l] += p[at+e] * power
			if slope != nil {
				slope.Set(l, at+e, power)
			}
			power *= t
		}
	}
}

func normal(u float64) float64  { return 0.5 * math.Erfc(-u/math.Sqrt2) }
func density(u float64) float64 { return math.Exp(-u*u/2) / math.Sqrt(2*math.Pi) }

// lineFit is a finished fit.
type lineFit struct {
	p          []float64
	covariance *mat.SymDense
	naive      *mat.SymDense
	chi2       float64 // per degree of freedom, of the naive errors
	status     Status
}

// fit fits values with their variances, 0 for a channel that is not good, by
// Levenberg's and Marquardt's method (Marquardt 1963, J. SIAM 11, 431), weights
// 1/variance. The errors are those of the channels' covariance, [channel][lag]:
// with J the slopes, W the weights and H = (J'WJ)^-1, that of the parameters is
// H J'W C W J H.
func (m *lineModel) fit(values, variance []float64, covariance [][]float64) lineFit {
	good := 0
	for _, v := range variance {
		if v > 0 {
			good++
		}
	}
	n := m.parameters()
	if good < n+2 || 3*good < 2*len(values) {
		return lineFit{status: NoData}
	}
	p, ok := m.search(values, variance)
	if !ok {
		return lineFit{status: NotSettled}
	}
	p, chi2, ok := m.descend(p, values, variance)
	if !ok {
		return lineFit{p: p, status: NotSettled}
	}
	f := lineFit{p: p, chi2: chi2 / float64(good-n)}
	if f.covariance, f.naive = m.errors(p, variance, covariance); f.covariance == nil {
		f.status = NotSettled
	}
	return f
}

// search tries velocities over the range, half a voxel apart, and solves for what is
// linear.
func (m *lineModel) search(values, variance []float64) (best []float64, ok bool) {
	stepKmS := math.Abs(m.edges[1]-m.edges[0]) / m.middle * lightKmS / 2
	n := max(1, int(m.o.RangeKmS/stepKmS))
	least := math.Inf(1)
	p := make([]float64, m.parameters())
	for i := -n; i <= n; i++ {
		for s := range m.shapes() {
			p[s] = m.o.VelocityKmS + m.o.RangeKmS*float64(i)/float64(n)
			p[m.shapes()+s] = m.sigma0
		}
		chi2, solved := m.solveLinear(p, values, variance)
		if solved && chi2 < least && m.positive(p) {
			least, ok = chi2, true
			best = append(best[:0], p...)
		}
	}
	return best, ok
}

// positive tells whether the lines together are in emission.
func (m *lineModel) positive(p []float64) bool {
	return total(p[m.fluxAt(0):m.fluxAt(len(m.o.RestNM))]) > 0
}

// solveLinear sets fluxes and continuum for the velocities and widths in p.
func (m *lineModel) solveLinear(p, values, variance []float64) (chi2 float64, ok bool) {
	from := m.fluxAt(0)
	for i := from; i < len(p); i++ {
		p[i] = 0
	}
	slope := mat.NewDense(len(values), len(p), nil)
	model := make([]float64, len(values))
	m.eval(p, model, slope)
	k := len(p) - from
	normal, right := mat.NewSymDense(k, nil), mat.NewVecDense(k, nil)
	for l, v := range values {
		if !(variance[l] > 0) {
			continue
		}
		row := slope.RawRowView(l)[from:]
		for a := range k {
			right.SetVec(a, right.AtVec(a)+row[a]*v/variance[l])
			for b := range a + 1 {
				normal.SetSym(a, b, normal.At(a, b)+row[a]*row[b]/variance[l])
			}
		}
	}
	var chol mat.Cholesky
	var x mat.VecDense
	if !chol.Factorize(normal) || chol.SolveVecTo(&x, right) != nil {
		return 0, false
	}
	copy(p[from:], x.RawVector().Data)
	m.eval(p, model, nil)
	return chiSquare(model, values, variance), true
}

func chiSquare(model, values, variance []float64) float64 {
	sum := 0.0
	for l, v := range values {
		if variance[l] > 0 {
			sum += (v - model[l]) * (v - model[l]) / variance[l]
		}
	}
	return sum
}

const (
	// fitSteps bounds the descent: a good fit takes 5 to 10.
	fitSteps = 60
	// settled is the change of chi-square that no error feels.
	settled = 1e-4
)

// descend improves p until chi-square settles; false if it does not, or runs out of
// the range of velocities or to a width of none.
func (m *lineModel) descend(p, values, variance []float64) (best []float64, chi2 float64, ok bool) {
	n := len(p)
	model, trial := make([]float64, len(values)), make([]float64, n)
	m.eval(p, model, nil)
	chi2 = chiSquare(model, values, variance)
	damping := 1e-3
	for range fitSteps {
		slope := mat.NewDense(len(values), n, nil)
		m.eval(p, model, slope)
		normal, right := m.normal(slope, model, values, variance)
		for i := range n {
			normal.SetSym(i, i, normal.At(i, i)*(1+damping)+1e-300)
		}
		var chol mat.Cholesky
		var step mat.VecDense
		if !chol.Factorize(normal) || chol.SolveVecTo(&step, right) != nil {
			damping *= 10
			continue
		}
		for i := range trial {
			trial[i] = p[i] + step.AtVec(i)
		}
		if !m.sane(trial) {
			if damping *= 10; damping > 1e8 {
				return p, chi2, false
			}
			continue
		}
		m.eval(trial, model, nil)
		next := chiSquare(model, values, variance)
		if !(next <= chi2) {
			if damping *= 10; damping > 1e8 {
				return p, chi2, true // at rounding
			}
			continue
		}
		done := chi2-next < settled && damping < 1
		copy(p, trial)
		chi2 = next
		damping = max(damping/10, 1e-9)
		if done {
			return p, chi2, true
		}
	}
	return p, chi2, false
}

// normal equations J'WJ and J'W(values - model).
func (m *lineModel) normal(slope *mat.Dense, model, values, variance []float64) (*mat.SymDense, *mat.VecDense) {
	n := m.parameters()
	normal, right := mat.NewSymDense(n, nil), mat.NewVecDense(n, nil)
	for l, v := range values {
		if !(variance[l] > 0) {
			continue
		}
		row := slope.RawRowView(l)
		for a := range n {
			right.SetVec(a, right.AtVec(a)+row[a]*(v-model[l])/variance[l])
			for b := range a + 1 {
				normal.SetSym(a, b, normal.At(a, b)+row[a]*row[b]/variance[l])
			}
		}
	}
	return normal, right
}

// sane tells whether velocities are in the range, and widths those of lines: from a
// third of a voxel to half of the window.
func (m *lineModel) sane(p []float64) bool {
	least := math.Abs(m.edges[1]-m.edges[0]) / 3
	for s := range m.shapes() {
		if math.Abs(p[s]-m.o.VelocityKmS) > 1.5*m.o.RangeKmS || !(p[m.shapes()+s] > least && p[m.shapes()+s] < m.half) {
			return false
		}
	}
	return true
}

// errors gives the covariance of the parameters by that of the channels, and the
// one for independent channels; nil where the parameters cannot be told apart.
func (m *lineModel) errors(p, variance []float64, covariance [][]float64) (full, naive *mat.SymDense) {
	n := len(p)
	slope := mat.NewDense(len(variance), n, nil)
	model := make([]float64, len(variance))
	m.eval(p, model, slope)
	normal, _ := m.normal(slope, model, model, variance)
	var chol mat.Cholesky
	naive = mat.NewSymDense(n, nil)
	if !chol.Factorize(normal) || chol.InverseTo(naive) != nil {
		return nil, nil
	}
	weighted := mat.NewDense(len(variance), n, nil) // W J H
	weighted.Mul(slope, naive)
	for l, v := range variance {
		for i, x := range weighted.RawRowView(l) {
			if v > 0 {
				weighted.Set(l, i, x/v)
			} else {
				weighted.Set(l, i, 0)
			}
		}
	}
	full = mat.NewSymDense(n, nil)
	for l := range variance {
		for lag, c := range covariance[l] {
			if l+lag >= len(variance) {
				break
			}
			a, b := weighted.RawRowView(l), weighted.RawRowView(l+lag)
			for i := range n {
				for k := range i + 1 {
					v := a[i] * b[k]
					if lag > 0 {
						v += b[i] * a[k]
					}
					full.SetSym(i, k, full.At(i, k)+c*v)
				}
			}
		}
	}
	return full, naive
}

// lines reads the fitted lines; response is the relative variance that the lines'
// channels share.
func (m *lineModel) lines(f *lineFit, response float64) []Line {
	all := make([]Line, len(m.o.RestNM))
	for i, rest := range m.o.RestNM {
		nan := math.NaN()
		all[i] = Line{RestNM: rest, Flux: nan, FluxErr: nan, FluxNaiveErr: nan, Velocity: nan, VelocityErr: nan, Width: nan, WidthErr: nan}
		if f.covariance == nil {
			continue
		}
		k, s := m.fluxAt(i), m.shapeOf(i)
		line := &all[i]
		line.Flux = f.p[k]
		line.FluxErr = math.Sqrt(f.covariance.At(k, k) + response*line.Flux*line.Flux)
		line.FluxNaiveErr = math.Sqrt(f.naive.At(k, k))
		if !(m.strongest(f, s) >= m.o.MinSN) {
			f.status |= BelowMinSN
			continue
		}
		w := m.shapes() + s
		toKmS := fwhmPerSigma / (rest * physics.DopplerFactor(f.p[s])) * lightKmS
		line.Velocity, line.VelocityErr = f.p[s], math.Sqrt(f.covariance.At(s, s))
		line.Width, line.WidthErr = f.p[w]*toKmS, math.Sqrt(f.covariance.At(w, w))*toKmS
	}
	return all
}

// strongest is the largest S/N of the lines that share a velocity.
func (m *lineModel) strongest(f *lineFit, shape int) float64 {
	most := 0.0
	for i := range m.o.RestNM {
		if m.shapeOf(i) == shape {
			k := m.fluxAt(i)
			most = max(most, f.p[k]/math.Sqrt(f.covariance.At(k, k)))
		}
	}
	return most
}
