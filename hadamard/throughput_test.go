package hadamard

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// throughputTrial is what one scene at one S/N gave, over some nights.
type throughputTrial struct {
	before, after, predicted float64 // rms of c
	decodedBefore, decoded   float64 // rms of what it leaves in the lit columns
	kept, measured           int
}

func tryThroughput(t testing.TB, c *Code, s fieldLight, snr float64, pixels, nights int) throughputTrial {
	t.Helper()
	var r throughputTrial
	v := c.V()
	g := DefaultDark(v)
	n := float64(v * nights)
	for night := range uint64(nights) {
		m := newMiniature(t, c, g, pixels, snr, s, night+1)
		truth, times := m.drift(0.05, 0.3)
		m.expose(truth)
		fit, err := m.checks.Throughput(m.gram(), DefaultThroughputPrior(times, 0.05, 0.3))
		require.NoError(t, err)
		mean := 0.0
		for k, x := range truth {
			mean += fit.C[k] / float64(v)
			require.InDelta(t, 1/fit.C[k]-1, fit.E[k], 1e-12)
			r.before += (x - 1) * (x - 1) / n
			r.after += (x - fit.C[k]) * (x - fit.C[k]) / n
		}
		require.InDelta(t, 1, mean, 1e-12)
		r.predicted += fit.Error * fit.Error / float64(nights)
		if fit.Kept {
			r.kept++
		}
		if fit.Measured() {
			r.measured++
		}
		raw := m.decodedError(func(k int) float64 { return truth[k] })
		corrected := m.decodedError(func(k int) float64 { return truth[k] / fit.C[k] })
		require.Less(t, corrected, raw, "a night that the correction harms")
		r.decodedBefore, r.decoded = r.decodedBefore+raw*raw, r.decoded+corrected*corrected
	}
	for _, x := range []*float64{&r.before, &r.after, &r.predicted, &r.decodedBefore, &r.decoded} {
		*x = math.Sqrt(*x)
	}
	return r
}

// decodedError is the rms over lit columns of the noiseless decode of readings times
// factor, less the light; over up to 100 pixels.
func (m *miniature) decodedError(factor func(k int) float64) float64 {
	v, pixels := m.code.V(), min(100, m.pixels)
	y, f := make([]float32, v*pixels), make([]float32, v*pixels)
	for k := range v {
		for p := range pixels {
			y[k*pixels+p] = float32(factor(k) * float64(m.clean[k*m.pixels+p]))
		}
	}
	m.decoder.Decode(f, y, pixels, pixels)
	sum := 0.0
	for j, dark := range m.checks.isDark() {
		for p := range pixels {
			if !dark {
				d := float64(f[j*pixels+p] - m.light[j*m.pixels+p])
				sum += d * d
			}
		}
	}
	return math.Sqrt(sum)
}

// TestThroughput: 5 % scatter and a 30 % trend on six scenes. The error of c is as
// predicted within 20 %, over v rows of each of 8 nights, and every night is better
// decoded with the correction than without, one star too. Scenes of many profiles
// measure every frame, the others say that they do not.
func TestThroughput(t *testing.T) {
	t.Log("scene         S/N   before     after  predicted  decoded  measured")
	for _, name := range []string{"field", "lines", "five stars", "one star", "continuum", "one profile"} {
		for _, snr := range []float64{1, 30} {
			const nights = 8
			r := tryThroughput(t, mustCode(t, MSequence, 63), fields[name], snr, 1500, nights)
			t.Logf("%-12s %4.0f   %.4f   %.5f   %.5f   %.4f   %d", name, snr, r.before, r.after, r.predicted, r.decoded/r.decodedBefore, r.measured)
			require.InEpsilon(t, r.predicted, r.after, 0.2)
			if snr > 1 {
				require.GreaterOrEqual(t, r.kept, nights-1)
			}
			rich := snr > 1 && (name == "field" || name == "lines" || name == "five stars")
			require.Equal(t, map[bool]int{true: nights}[rich], r.measured)
		}
	}
	r := tryThroughput(t, mustCode(t, Legendre, 59), fields["field"], 30, 1500, 4)
	require.InEpsilon(t, r.predicted, r.after, 0.2)
	require.Less(t, r.after, 0.02)
}

// TestThroughputHoldsOut: the residual of the fit is below the noise and proves
// nothing; the held-out one is at the noise where the fit is right, and with readings
// that no throughput explains it stays far above.
func TestThroughputHoldsOut(t *testing.T) {
	c := mustCode(t, MSequence, 63)
	m := newMiniature(t, c, 16, 60, 100, fields["field"], 5)
	truth, times := m.drift(0.05, 0.3)
	m.expose(truth)
	prior := DefaultThroughputPrior(times, 0.05, 0.3)
	g := m.gram()
	a, b := m.checks.splits()[0].fit, m.checks.splits()[0].judge
	fit, err := a.fitThroughput(g, prior)
	require.NoError(t, err)
	fitted, expected, _ := a.Chi2(g.Scaled(fit.factors()))
	held, expectedHeld, _ := b.Chi2(g.Scaled(fit.factors()))
	raw, _, _ := b.Chi2(g)
	t.Logf("chi-square over noise: %.2f before, %.3f fitted, %.3f held out", raw/expectedHeld, fitted/expected, held/expectedHeld)
	require.Less(t, fitted/expected, 0.97)
	require.Greater(t, held/expectedHeld, 1.2)
	require.Greater(t, raw/held, 3.0)

	// Frames whose light moves from element to element: nothing that a factor cures.
	rng := rand.New(rand.NewPCG(9, 9))
	for k := range c.V() {
		for p := range m.pixels {
			m.y[k*m.pixels+p] += float32(200 * rng.NormFloat64())
		}
	}
	whole, err := m.checks.Throughput(m.gram(), prior)
	require.NoError(t, err)
	require.Greater(t, whole.HeldOut.After, 1.5*whole.HeldOut.ExpectedAfter)
}

// TestThroughputWithoutDrift: a steady night is left alone, or changed by no more than
// the error that the fit states.
func TestThroughputWithoutDrift(t *testing.T) {
	for seed := range uint64(6) {
		m := newMiniature(t, mustCode(t, MSequence, 63), 16, 800, 20, fields["field"], seed)
		m.expose(nil)
		fit, err := m.checks.Throughput(m.gram(), DefaultThroughputPrior(centredTimes(63), 0.05, 0.3))
		require.NoError(t, err)
		sum := 0.0
		for _, x := range fit.C {
			sum += (x - 1) * (x - 1) / 63
		}
		require.InEpsilon(t, fit.Error, math.Sqrt(sum), 0.4) // 63 rows: 9 % of scatter
	}
}

// TestThroughputWithLostRows: rows taken out say nothing and do not disturb the rest.
func TestThroughputWithLostRows(t *testing.T) {
	m := newMiniature(t, mustCode(t, MSequence, 63), 16, 1500, 30, fields["field"], 3)
	truth, times := m.drift(0.05, 0)
	m.expose(truth)
	lost := []int{5, 40, 41}
	for _, k := range lost {
		for p := range m.pixels {
			m.y[k*m.pixels+p] = 1e4
		}
	}
	checks, err := m.checks.WithoutRows(lost)
	require.NoError(t, err)
	fit, err := checks.Throughput(m.gram(), DefaultThroughputPrior(times, 0.05, 0.1))
	require.NoError(t, err)
	require.True(t, fit.Kept)
	mean, used := 0.0, 0.0
	for k, x := range truth {
		if !slices.Contains(lost, k) {
			mean, used = mean+x, used+1
		}
	}
	sum := 0.0
	for k, x := range truth {
		if slices.Contains(lost, k) {
			require.Greater(t, fit.CErr[k], 0.04)
			continue
		}
		d := fit.C[k] - x*used/mean
		sum += d * d / used
	}
	require.InEpsilon(t, fit.Error, math.Sqrt(sum), 0.3) // 60 rows: 9 % of scatter
	require.Less(t, fit.Error, 0.02)
}

// TestThroughputOfFaintNights: where there is hardly light, nothing is fitted to noise.
func TestThroughputOfFaintNights(t *testing.T) {
	for seed := range uint64(10) {
		m := newMiniature(t, mustCode(t, MSequence, 63), 16, 500, 0.03, fields["continuum"], seed)
		m.expose(nil)
		fit, err := m.checks.Throughput(m.gram(), DefaultThroughputPrior(centredTimes(63), 0.05, 0.3))
		require.NoError(t, err)
		require.False(t, fit.Kept)
		require.False(t, fit.Measured())
	}
}

func TestThroughputRefuses(t *testing.T) {
	c := mustCode(t, MSequence, 31)
	checks := mustChecks(t, c, []int{1, 4, 5, 9, 12, 17, 20, 28})
	prior := DefaultThroughputPrior(centredTimes(31), 0.05, 0.3)
	_, err := checks.Throughput(NewGram(31), prior)
	require.ErrorContains(t, err, "none of the 0 sampled pixels")
	_, err = checks.Throughput(NewGram(15), prior)
	require.ErrorContains(t, err, "31 code rows")
	g := NewGram(31)
	y := randomBlock(3, 31, 100)
	g.Add(y, y, 100, 100, 1)
	wrong := mat.NewSymDense(31, nil)
	for k := range 31 {
		wrong.SetSym(k, k, -1)
	}
	_, err = checks.Throughput(g, wrong)
	require.ErrorIs(t, err, errNoCovariance)
}
