package calib

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// lineFit is the least-squares fit of a group of lines:
//
//	s(x) = background + sum_k flux_k int_{x-1/2}^{x+1/2} N(centre_k, sigma_k).
//
// Parameters: background, then flux, centre, sigma of each line.
type lineFit struct {
	x, value, weight []float64
	start, p         []float64
	lines            int
	expected         float64       // sigma
	inverse          *mat.SymDense // of the normal matrix at the solution
	active           []int         // scratch: parameters that a sample feels
	row              []float64     // scratch: their derivatives
}

func (f *lineFit) flux(k int) float64   { return f.p[1+3*k] }
func (f *lineFit) centre(k int) float64 { return f.p[2+3*k] }
func (f *lineFit) sigma(k int) float64  { return f.p[3+3*k] }

// feltSigmas is how far a line is felt: 2e-5 of its peak.
const feltSigmas = 4.7

// newLineFit takes the samples within 1.8 FWHM of a group's starts: that is where
// line and background part.
func (r PeakRule) newLineFit(s *blockSpectrum, at []float64) *lineFit {
	f := &lineFit{lines: len(at), expected: r.FWHMPx / sigmasPerFWHM}
	reach := 1.8 * r.FWHMPx
	for x := max(0, int(at[0]-reach)); x <= min(len(s.signal)-1, int(math.Ceil(at[len(at)-1]+reach))); x++ {
		near := false
		for _, c := range at {
			near = near || math.Abs(float64(x)-c) <= reach
		}
		if near && s.variance[x] > 0 {
			f.x, f.value, f.weight = append(f.x, float64(x)), append(f.value, s.signal[x]), append(f.weight, 1/s.variance[x])
		}
	}
	f.start = append(f.start, 0)
	signal := s.bridged()
	for _, c := range at {
		height := max(signal[int(c)], 0)
		f.start = append(f.start, height*f.expected*math.Sqrt(2*math.Pi), c, f.expected)
	}
	f.p = append([]float64(nil), f.start...)
	return f
}

// solve runs Levenberg-Marquardt; centres and widths stay near where they started. It
// is false where the samples do not fix the parameters.
func (f *lineFit) solve() bool {
	n := len(f.p)
	if len(f.x) <= n {
		return false
	}
	damping := 1e-3
	trial := make([]float64, n)
	chi2 := f.misfit(f.p)
	for range maxSteps {
		normal, right := f.normal()
		step, ok := dampedStep(normal, right, damping)
		if !ok {
			return false
		}
		for i := range trial {
			trial[i] = f.p[i] + step.AtVec(i)
		}
		f.confine(trial)
		next := f.misfit(trial)
		if next > chi2*(1+1e-12) {
			if damping *= 8; damping > 1e8 {
				break // as low as rounding lets it see
			}
			continue
		}
		settled := f.settled(trial)
		copy(f.p, trial)
		chi2, damping = next, max(damping/8, 1e-9)
		if settled {
			break
		}
	}
	return f.invert()
}

// withoutWeakest is the list of starts without that of the least flux.
func (f *lineFit) withoutWeakest(at []float64) []float64 {
	weakest := 0
	for k := range f.lines {
		if f.p[1+3*k] < f.p[1+3*weakest] {
			weakest = k
		}
	}
	return slices.Delete(slices.Clone(at), weakest, weakest+1)
}

// invert inverts the normal matrix.
func (f *lineFit) invert() bool {
	normal, _ := f.normal()
	var chol mat.Cholesky
	if !chol.Factorize(normal) {
		return false
	}
	f.inverse = mat.NewSymDense(len(f.p), nil)
	return chol.InverseTo(f.inverse) == nil
}

// settled: centres and widths move by less than 1e-4 px.
func (f *lineFit) settled(next []float64) bool {
	for k := range f.lines {
		if math.Abs(next[2+3*k]-f.p[2+3*k]) > 1e-4 || math.Abs(next[3+3*k]-f.p[3+3*k]) > 1e-4 {
			return false
		}
	}
	return true
}

// confine keeps a trial where lines are lines. What ends at a bound is none: see
// isLine, whose limits are closer.
func (f *lineFit) confine(p []float64) {
	for k := range f.lines {
		c, s := &p[2+3*k], &p[3+3*k]
		*c = min(max(*c, f.start[2+3*k]-2*f.expected), f.start[2+3*k]+2*f.expected)
		*s = min(max(*s, 0.4*f.expected), 2*f.expected)
	}
}

func (f *lineFit) misfit(p []float64) float64 {
	sum := 0.0
	for i, x := range f.x {
		d := f.value[i] - f.model(p, x)
		sum += f.weight[i] * d * d
	}
	return sum
}

func (f *lineFit) model(p []float64, x float64) float64 {
	model := p[0]
	for k := range f.lines {
		if flux, c, s := p[1+3*k], p[2+3*k], p[3+3*k]; math.Abs(x-c) < feltSigmas*s+0.5 {
			model += flux * (phi((x+0.5-c)/s) - phi((x-0.5-c)/s))
		}
	}
	return model
}

// normal is J'WJ and J'W(value - model) at p.
func (f *lineFit) normal() (*mat.SymDense, *mat.VecDense) {
	n := len(f.p)
	normal, right := mat.NewSymDense(n, nil), mat.NewVecDense(n, nil)
	for i, x := range f.x {
		miss := f.value[i] - f.derive(x)
		for a, p := range f.active {
			right.SetVec(p, right.AtVec(p)+f.weight[i]*f.row[a]*miss)
			for b, q := range f.active[a:] {
				normal.SetSym(p, q, normal.At(p, q)+f.weight[i]*f.row[a]*f.row[a+b])
			}
		}
	}
	return normal, right
}

// derive sets active and row at x and returns the model.
func (f *lineFit) derive(x float64) float64 {
	f.active, f.row = append(f.active[:0], 0), append(f.row[:0], 1)
	model := f.p[0]
	for k := range f.lines {
		flux, c, s := f.p[1+3*k], f.p[2+3*k], f.p[3+3*k]
		if math.Abs(x-c) >= feltSigmas*s+0.5 {
			continue
		}
		a, b := (x-0.5-c)/s, (x+0.5-c)/s
		share, na, nb := phi(b)-phi(a), normalDensity(a), normalDensity(b)
		model += flux * share
		f.active = append(f.active, 1+3*k, 2+3*k, 3+3*k)
		f.row = append(f.row, share, flux*(na-nb)/s, flux*(a*na-b*nb)/s)
	}
	return model
}

// dampedStep solves (M + damping diag M) step = right.
func dampedStep(m *mat.SymDense, right *mat.VecDense, damping float64) (*mat.VecDense, bool) {
	n := m.SymmetricDim()
	damped := mat.NewSymDense(n, nil)
	damped.CopySym(m)
	for i := range n {
		damped.SetSym(i, i, m.At(i, i)*(1+damping))
	}
	var chol mat.Cholesky
	if !chol.Factorize(damped) {
		return nil, false
	}
	step := mat.NewVecDense(n, nil)
	return step, chol.SolveVecTo(step, right) == nil
}

// peak reports line k. Errors grow with the misfit around the line: bright lines show
// the pixels' unequal response, which the variances do not know.
func (f *lineFit) peak(k int) Peak {
	c := f.p[2+3*k]
	chi2, n := 0.0, 0.0
	for i, x := range f.x {
		if math.Abs(x-c) <= f.expected*sigmasPerFWHM {
			d := f.value[i] - f.model(f.p, x)
			chi2, n = chi2+f.weight[i]*d*d, n+1
		}
	}
	// Of n samples, some 3 parameters' worth are spent.
	scale := math.Sqrt(max(1, chi2/max(1, n-3)))
	err := func(i int) float64 { return scale * math.Sqrt(f.inverse.At(i, i)) }
	return Peak{X: c, XErr: err(2 + 3*k), Flux: f.flux(k), FluxErr: err(1 + 3*k),
		FWHM: sigmasPerFWHM * f.p[3+3*k], FWHMErr: sigmasPerFWHM * err(3+3*k)}
}

// phi is the normal distribution.
func phi(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }

func normalDensity(x float64) float64 { return math.Exp(-x*x/2) / math.Sqrt(2*math.Pi) }
