package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// leakNight is an all-off frame, ten frames' mean, of a lampField whose mirrors leak
// 20 % differently over the device, read by two amplifiers with wrong levels.
type leakNight struct {
	*lampField
	before, after float64
	// structure of the field and beyond, without mean over the field.
	wave, phase [2]float64
	tilt        float64
}

func newLeakNight(seed uint64) (*leakNight, *rand.Rand) {
	rng := rand.New(rand.NewPCG(seed, 9))
	n := &leakNight{lampField: newLampField(), before: 8, after: 8.5, tilt: 0.3 * rng.NormFloat64()}
	for i := range n.wave {
		n.wave[i], n.phase[i] = 1.5*rng.Float64(), 2*math.Pi*rng.Float64()
	}
	return n, rng
}

// leak is what a closed mirror sends on of what opening it adds.
func (*leakNight) leak(nm float64) float64 {
	return 1/3700.0 + 6e-7*(nm-580) + 2e-9*(nm-580)*(nm-580)
}

// raw is the structure with its mean.
func (n *leakNight) raw(j float64, y int) float64 {
	s, t := j/float64(n.elements), float64(y-12)/30
	return 1 + 0.2*math.Sin(2*math.Pi*(n.wave[0]*s+n.wave[1]*t)+n.phase[0]) + 0.1*n.tilt*(s-0.5)*(t-0.5)
}

// mean is that of the field's structure.
func (n *leakNight) mean() float64 {
	sum := 0.0
	for j := range n.elements {
		for y := 12; y < 42; y++ {
			sum += n.raw(float64(j), y) / float64(30*n.elements)
		}
	}
	return sum
}

// term is the row of an all-off frame.
func (n *leakNight) term(y int, mean float64, rng *rand.Rand) (term, variance []float32) {
	term, variance = make([]float32, n.columns), make([]float32, n.columns)
	for x := range term {
		sum := 0.0
		for j := -9; j < n.elements+9; j++ {
			v, nm := n.light(float64(j), x, y)
			switch {
			case v == 0 || j == -9:
				continue
			case j == n.elements+8:
				v *= 0.5
			}
			if j >= 0 && j < n.elements {
				v *= n.raw(float64(j), y) / mean
			}
			sum += v * n.leak(nm)
		}
		level := 0.4
		if x >= n.columns/2 {
			level = -0.7
		}
		term[x] = float32(sum + level + math.Sqrt((sum+9)/10)*rng.NormFloat64())
		// As the reduction has it, from the noisy value itself.
		variance[x] = (max(term[x], 0) + 9) / 10
	}
	return term, variance
}

func (n *leakNight) fit(t *testing.T, rng *rand.Rand, shape *ColourTerm) *ColourTerm {
	t.Helper()
	frame := LeakFrame{Geometry: n.geometry, Elements: n.elements, Columns: n.columns, LevelSigma: []float64{0.03, 0.03}, LevelRows: 17}
	owner := make([]uint8, n.columns)
	for x := n.columns / 2; x < n.columns; x++ {
		owner[x] = 1
	}
	for y := range n.rows {
		frame.Coded = append(frame.Coded, y >= 12 && y < 42)
	}
	fit, err := NewLeakFit(DefaultLeakRule(), frame, shape)
	require.NoError(t, err)
	mean := n.mean()
	for y := 0; y < n.rows; y += 2 {
		row := LeakRow{Y: y, Amplifier: owner, Before: everyColumn(n.before, n.columns), After: everyColumn(n.after, n.columns)}
		row.Term, row.Variance = n.term(y, mean, rng)
		if frame.Coded[y] {
			row.Light = n.row(y, 37, rng)
		}
		fit.AddRow(row)
	}
	e, err := fit.Solve()
	require.NoError(t, err)
	return e
}

func everyColumn(v float64, columns int) []float64 {
	list := make([]float64, columns)
	for x := range list {
		list[x] = v
	}
	return list
}

// Contrast within 3 % with an error that holds, whatever the structure of the leak: N =
// 4 nights. The second fit takes the first's colour, as the reduction does.
func TestLeakFit(t *testing.T) {
	const nights = 4
	places := []float64{500, 580, 660}
	square := 0.0
	for seed := range uint64(nights) {
		n, rng := newLeakNight(20 + seed)
		e := n.fit(t, rng, nil)
		if seed < 1 {
			e = n.fit(t, rng, e)
		}
		require.InDelta(t, 1, e.Chi2, 0.1)
		for _, nm := range places {
			ratio, sigma := e.Contrast(nm)
			truth := 1 + 1/n.leak(nm)
			t.Logf("night %d, %g nm: contrast %.0f +- %.0f, truth %.0f", seed, nm, ratio, sigma, truth)
			require.InEpsilon(t, truth, ratio, 0.03)
			require.Less(t, sigma, 0.03*ratio)
			square += math.Pow((ratio-truth)/sigma, 2) / float64(nights*len(places))
		}
	}
	t.Logf("rms pull %.2f", math.Sqrt(square))
	require.Less(t, math.Sqrt(square), 1.5)
}

func TestContrastOfNoLeak(t *testing.T) {
	dark := ColourTerm{CenterNM: 580, Coef: []float64{0}, Covariance: mat.NewSymDense(1, []float64{1})}
	ratio, sigma := dark.Contrast(580)
	require.True(t, math.IsInf(ratio, 1) && math.IsInf(sigma, 1))
}

func TestLeakFitRefuses(t *testing.T) {
	good := LeakFrame{Geometry: newLampField().geometry, Elements: 5, Columns: 40, Coded: make([]bool, 3), LevelSigma: []float64{0}, LevelRows: 1}
	for _, change := range []func(*LeakRule, *LeakFrame){
		func(_ *LeakRule, f *LeakFrame) { f.Elements = 0 },
		func(_ *LeakRule, f *LeakFrame) { f.Columns = 0 },
		func(_ *LeakRule, f *LeakFrame) { f.LevelSigma = nil },
		func(_ *LeakRule, f *LeakFrame) { f.LevelRows = 0 },
		func(r *LeakRule, _ *LeakFrame) { r.Degree = -1 },
		func(r *LeakRule, _ *LeakFrame) { r.Beyond = nil },
	} {
		rule, frame := DefaultLeakRule(), good
		change(&rule, &frame)
		_, err := NewLeakFit(rule, frame, nil)
		require.Error(t, err)
	}
	fit, err := NewLeakFit(DefaultLeakRule(), good, nil)
	require.NoError(t, err)
	_, err = fit.Solve()
	require.ErrorIs(t, err, ErrNoLight)
	ones := make([]float32, 40)
	for x := range ones {
		ones[x] = 1
	}
	fit.AddRow(LeakRow{Y: 1, Term: ones, Variance: ones, Amplifier: make([]uint8, 40)})
	_, err = fit.Solve()
	require.ErrorIs(t, err, ErrNoLight)
}
