package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// lampField is the light of a lamp through each element, on the detector: a band of
// 480 to 680 nm, waves in it, a slit of 30 rows between dark ones.
type lampField struct {
	geometry                Geometry
	elements, columns, rows int
}

func newLampField() *lampField {
	return &lampField{
		geometry: Geometry{X_c: 319.5, Y_c: 30, X_e: 1.96, J_c: 55, L_c: 580, D: [3]float64{2, 2e-4, -1e-6}, SlitTilt: 0.015, Smile: 8e-5, TraceTilt: 0.0045},
		elements: 111, columns: 640, rows: 60,
	}
}

// light of the element at place j (outside the field too) in a pixel, and its
// wavelength.
func (f *lampField) light(j float64, x, y int) (light, nm float64) {
	g := &f.geometry
	nm = g.Wavelength(float64(x), j, float64(y)-g.TraceShift(float64(x)))
	if y < 12 || y >= 42 || !(nm > 476 && nm < 686) {
		return 0, nm
	}
	ends := min(1, (nm-476)/6, (686-nm)/6)
	return 400 * ends * (1 + (nm-580)/300 + 0.015*math.Sin(nm/6+j/20)), nm
}

// row gives each row's light by element, with the noise of a decode.
func (f *lampField) row(y int, noise float64, rng *rand.Rand) [][]float32 {
	rows := make([][]float32, f.elements)
	for j := range rows {
		rows[j] = make([]float32, f.columns)
		for x := range rows[j] {
			v, _ := f.light(float64(j), x, y)
			if v > 0 {
				v += noise * rng.NormFloat64()
			}
			rows[j][x] = float32(v)
		}
	}
	return rows
}

// The neighbour term by the definition of section 3 - every pair's d(L) f/2 of both -
// from four lamp frames with photon noise, from the decoded light with its own noise:
// d0 and d1 with errors that hold.
func TestNeighbourFit(t *testing.T) {
	f := newLampField()
	g := &f.geometry
	const d0, d1, curve = 0.01, 0.01 / 580, 0.004 / 75000
	rng := rand.New(rand.NewPCG(1, 9))
	fit, err := NewColourFit(NeighbourRule(f.elements), *g, f.elements, f.columns)
	require.NoError(t, err)
	for y := 0; y < f.rows; y += 2 {
		term, variance := make([]float32, f.columns), make([]float32, f.columns)
		flags := make([]Flag, f.columns)
		for x := range term {
			all, pairs, even := 0.0, 0.0, 0.0
			for j := range f.elements {
				v, nm := f.light(float64(j), x, y)
				all += v
				if j%2 == 0 {
					even += v
				}
				own := v * (d0 + d1*(nm-580)) / 2
				if j > 0 {
					pairs += own
				}
				if j < f.elements-1 {
					pairs += own
				}
			}
			sigma := math.Sqrt(2*all + 4*25)
			if all > 0 {
				bent := func(e float64) float64 { return e * (1 - curve*e) }
				term[x] = float32(bent(all+pairs) - bent(even) - bent(all-even))
			}
			term[x] += float32(sigma * rng.NormFloat64())
			variance[x] = float32(sigma * sigma)
			if rng.Float64() < 0.01 {
				term[x] += 20000 // struck
			}
			if rng.Float64() < 0.01 {
				term[x], flags[x] = float32(math.NaN()), BadPixel
			}
		}
		row := fit.Fork()
		row.AddRow(y, term, variance, flags, f.row(y, 37, rng))
		fit.Merge(row)
	}
	d, err := fit.Solve()
	require.NoError(t, err)
	value, sigma := d.At(580)
	t.Logf("d(580) = %.5f +- %.5f (truth %.5f), slope %.3g +- %.2g per nm (truth %.3g), chi2 %.3f, %d pixels, %d clipped", value, sigma, d0, d.Coef[1], math.Sqrt(d.Covariance.At(1, 1)), d1, d.Chi2, d.Pixels, d.Clipped)
	require.InDelta(t, d0, value, 5*sigma)
	require.Less(t, sigma, 0.06*d0) // a ghost of d/4 then keeps 0.015 % of a star
	t.Logf("curve %.3g +- %.2g per e (truth %.3g)", d.Curve, d.CurveError, curve)
	require.InDelta(t, curve, d.Curve, 5*d.CurveError)
	require.InDelta(t, d1, d.Coef[1], 5*math.Sqrt(d.Covariance.At(1, 1)))
	require.Greater(t, d.Significance(580), 20.0)
	require.InDelta(t, 1, d.Chi2, 0.1)
	require.InDelta(t, 0.01*float64(f.rows*f.columns)/2, d.Clipped, 60)
}

// The stated errors against the scatter of N = 100 fits.
func TestColourFitErrorMonteCarlo(t *testing.T) {
	f := newLampField()
	rng := rand.New(rand.NewPCG(6, 9))
	const trials, y = 100, 30
	light := f.row(y, 0, rng)
	term, variance := make([]float32, f.columns), make([]float32, f.columns)
	template, err := NewColourFit(NeighbourRule(f.elements), f.geometry, f.elements, f.columns)
	require.NoError(t, err)
	var pull, pullSlope float64
	for range trials {
		for x := range term {
			variance[x] = 40000
			term[x] = float32(200 * rng.NormFloat64())
		}
		fit := template.Fork()
		fit.AddRow(y, term, variance, nil, light)
		d, err := fit.Solve()
		require.NoError(t, err)
		pull += d.Coef[0] * d.Coef[0] / d.Covariance.At(0, 0) / trials
		pullSlope += d.Coef[1] * d.Coef[1] / d.Covariance.At(1, 1) / trials
	}
	t.Logf("squared pulls: %.2f and %.2f +- %.2f", pull, pullSlope, math.Sqrt(2.0/trials))
	require.InDelta(t, 1, pull, 5*math.Sqrt(2.0/trials))
	require.InDelta(t, 1, pullSlope, 5*math.Sqrt(2.0/trials))
}

func TestColourFitRefuses(t *testing.T) {
	f := newLampField()
	for _, c := range []struct {
		rule     ColourRule
		elements int
	}{{ColourRule{}, 0}, {ColourRule{Degree: 5}, 111}, {ColourRule{Degree: -1}, 111}, {NeighbourRule(5), 111}} {
		_, err := NewColourFit(c.rule, f.geometry, c.elements, f.columns)
		require.Error(t, err)
	}
	fit, err := NewColourFit(NeighbourRule(f.elements), f.geometry, f.elements, f.columns)
	require.NoError(t, err)
	_, err = fit.Solve()
	require.ErrorIs(t, err, ErrNoLight)
	dark := make([][]float32, f.elements)
	for j := range dark {
		dark[j] = make([]float32, f.columns)
	}
	ones := make([]float32, f.columns)
	for x := range ones {
		ones[x] = 1
	}
	fit.AddRow(3, ones, ones, nil, dark)
	_, err = fit.Solve()
	require.ErrorIs(t, err, ErrNoLight)
}
