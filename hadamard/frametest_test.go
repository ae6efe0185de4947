package hadamard

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"

	"mirrorloom/internal/outside"
)

// TestTailMeetsScipy, and where scipy underflows, the closed form of even degrees of
// freedom: exp(-x/2) times the sum of (x/2)^n/n!.
func TestTailMeetsScipy(t *testing.T) {
	var args []string
	var got []float64
	for _, dof := range []float64{1, 2, 7, 60, 1000, 30000} {
		for _, z := range []float64{-5, -2, -0.5, 0, 0.5, 2, 5, 12} {
			x := dof + z*math.Sqrt(2*dof)
			if x > 0 {
				args = append(args, fmt.Sprintf("%.17g,%.17g", x, dof))
				got = append(got, logChiSquareTail(x, dof))
			}
		}
	}
	lines := strings.Fields(outside.Python(t, "hadamard_tail.py", args...))
	require.Len(t, lines, len(got))
	for i, line := range lines {
		require.InDelta(t, atof(t, line), got[i], 1e-9+1e-9*math.Abs(got[i]), args[i])
	}
	for _, dof := range []int{2, 4, 10} {
		for _, x := range []float64{3, 3000, 1e6} {
			sum, term := 0.0, 1.0
			for n := range dof / 2 {
				sum += term
				term *= x / 2 / float64(n+1)
			}
			require.InEpsilon(t, math.Log(sum)-x/2, logChiSquareTail(x, float64(dof)), 1e-9)
		}
	}
	require.Zero(t, logChiSquareTail(0, 5))
}

// TestFrameTestsMeetErasure: Delta is by how much the chi-square falls when the row is
// taken out of the checks.
func TestFrameTestsMeetErasure(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 31), mustCode(t, Legendre, 23), planarCode(t, 21)} {
		v := c.V()
		g := NewGram(v)
		y := randomBlock(4, v, 50)
		g.Add(y, y, 50, 50, 1)
		full := mustChecks(t, c, []int{1, 4, 5, 9, 12, 17, 20})
		lost, err := full.WithoutRows([]int{6})
		require.NoError(t, err)
		for _, checks := range []*Checks{full, full.WithoutPedestal(), lost} {
			before, expected, _ := checks.Chi2(g)
			for k, x := range checks.FrameTests(g) {
				require.Equal(t, k, x.Row)
				less, err := checks.WithoutRows([]int{k})
				require.NoError(t, err)
				after, expectedAfter, _ := less.Chi2(g)
				require.InDelta(t, before-after, x.Delta, 1e-9*before)
				require.InDelta(t, expected-expectedAfter, x.Expected, 1e-9*before)
				require.InDelta(t, x.Delta, x.Expected, 1e9)
				if checks == lost && k == 6 {
					require.Equal(t, FrameTest{Row: 6}, x)
				}
			}
		}
	}
}

// TestFalseAlarms counts nights of pure noise in which any of v rows alarms at 1 %:
// 4000 draws of G, readings of unequal noise, within 5 standard errors of 1 % (the
// 25 000 draws are a validation).
func TestFalseAlarms(t *testing.T) {
	const draws, alpha = 4000, 0.01
	alarms := countFalseAlarms(t, 31, 10, 40, draws, alpha)
	require.InDelta(t, alpha*draws, float64(alarms), 5*math.Sqrt(alpha*draws))
	t.Logf("%d false alarms in %d draws at %g", alarms, draws, alpha)
}

// countFalseAlarms draws noise of rows whose variances differ by up to a factor of 3,
// in a pattern that differs between pixels.
func countFalseAlarms(t testing.TB, v, dark, pixels, draws int, alpha float64) int {
	rng := rand.New(rand.NewPCG(uint64(v), uint64(pixels)))
	c := mustCode(t, MSequence, v)
	checks := mustChecks(t, c, rng.Perm(v)[:dark])
	s2, y := make([]float32, v*pixels), make([]float32, v*pixels)
	for i := range s2 {
		s2[i] = 1 + 2*rng.Float32()
	}
	alarms := 0
	for range draws {
		for i, s := range s2 {
			y[i] = float32(math.Sqrt(float64(s)) * rng.NormFloat64())
		}
		g := NewGram(v)
		g.Add(y, s2, pixels, pixels, 0)
		least := 0.0
		for _, x := range checks.FrameTests(g) {
			least = min(least, x.LogP)
		}
		if least < FalseAlarm(alpha, v) {
			alarms++
		}
	}
	return alarms
}

// TestFrameTestsFindAFrame that shows another row's mask, at S/N 5.
func TestFrameTestsFindAFrame(t *testing.T) {
	m := newMiniature(t, mustCode(t, MSequence, 63), 16, 4000, 5, fields["field"], 2)
	m.expose(nil)
	copy(m.y[20*m.pixels:21*m.pixels], m.y[33*m.pixels:34*m.pixels])
	tests := m.checks.FrameTests(m.gram())
	worst := 0
	for k, x := range tests {
		if x.LogP < tests[worst].LogP {
			worst = k
		}
	}
	require.Equal(t, 20, worst)
	require.Less(t, tests[20].LogP, FalseAlarm(1e-6, 63))
	require.Equal(t, FrameTest{Row: 3}, m.checks.FrameTests(NewGram(63))[3], "no pixels, no tests")
}

// logChiSquareTail is the logarithm of the chance that a chi-square variable exceeds x.
func logChiSquareTail(x, dof float64) float64 { return logGammaTail(dof/2, x/2) }

// TestMixtureTail against 400 000 draws of z^2 and gamma (even shapes of a half: sums of
// squares), at chances down to 1e-3, within 5 standard errors and 5 %.
func TestMixtureTail(t *testing.T) {
	const draws, squares = 400_000, 6
	rng := rand.New(rand.NewPCG(1, 3))
	for _, single := range []float64{0.02, 0.3, 2} {
		limits := []float64{2, 3, 5}
		above := make([]int, len(limits))
		for range draws {
			z := rng.NormFloat64()
			sum := single * z * z
			for range squares {
				z := rng.NormFloat64()
				sum += z * z / squares
			}
			for i, l := range limits {
				if sum > l*(1+single) {
					above[i]++
				}
			}
		}
		for i, l := range limits {
			if above[i] > 100 {
				want := float64(above[i]) / draws
				got := math.Exp(logMixtureTail(l*(1+single), single, 1, 2.0/squares))
				require.InDelta(t, want, got, 5*math.Sqrt(want/draws)+0.05*want, "single %g, limit %g", single, l)
			}
		}
	}
	require.InEpsilon(t, logGammaTail(30, 50), logMixtureTail(50, 0, 30, 30), 1e-12)
	require.False(t, math.IsNaN(logMixtureTail(1e5, 1, 1, 0.1)))
}

// TestFrameTestsUnder uncertain factors. Uncorrected, frames of 2 % scatter that is stated
// as such: over 150 nights of 31 rows the mean of Delta/Expected is 1 within 3 %, and at 1 %
// a night no more than 6 alarm (1.5 expected; the law is approximate). Corrected by
// Throughput, with its posterior: no more than 6 again, and a frame with another row's mask
// is named.
func TestFrameTestsUnder(t *testing.T) {
	const v, nights, alpha = 31, 150, 0.01
	c := mustCode(t, MSequence, v)
	m := newMiniature(t, c, 10, 150, 40, fields["field"], 4)
	prior := scatter(0.02, v)
	alarms, corrected, ratio := 0, 0, 0.0
	for range nights {
		truth := make([]float64, v)
		for k := range truth {
			truth[k] = 1 + 0.02*m.rng.NormFloat64()
		}
		m.expose(truth)
		g := m.gram()
		least := 0.0
		for _, x := range m.checks.FrameTestsUnder(g, prior) {
			ratio += x.Delta / x.Expected / v / nights
			least = min(least, x.LogP)
		}
		if least < FalseAlarm(alpha, v) {
			alarms++
		}
		fit, err := m.checks.Throughput(g, prior)
		require.NoError(t, err)
		least = 0
		for _, x := range m.checks.FrameTestsUnder(g.Scaled(fit.factors()), fit.Posterior) {
			least = min(least, x.LogP)
		}
		if least < FalseAlarm(alpha, v) {
			corrected++
		}
	}
	t.Logf("Delta/Expected %.3f; alarms in %d nights: %d uncorrected, %d corrected", ratio, nights, alarms, corrected)
	require.InDelta(t, 1, ratio, 0.03)
	require.LessOrEqual(t, alarms, 6)
	require.LessOrEqual(t, corrected, 6)

	copy(m.y[20*m.pixels:21*m.pixels], m.y[13*m.pixels:14*m.pixels])
	tests := m.checks.FrameTestsUnder(m.gram(), prior)
	for k, x := range tests {
		if k != 20 {
			require.Less(t, tests[20].LogP, x.LogP)
		}
	}
	require.Less(t, tests[20].LogP, FalseAlarm(1e-6, v))
}

func TestPredictorsMeetDecode(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 31), mustCode(t, Legendre, 23), planarCode(t, 21)} {
		v := c.V()
		checks := mustChecks(t, c, []int{1, 4, 5, 9, 12, 17, 20})
		for _, lost := range [][]int{nil, {3}, {2, 8}} {
			r, err := checks.Predictors(lost)
			require.NoError(t, err)
			// W times the decode that Reweight makes, its dark columns zero.
			re, err := checks.Reweight(lostNoise(v, lost))
			require.NoError(t, err)
			var decode, want mat.Dense
			decode.Mul(re.T, checks.darkRows())
			decode.Add(&decode, c.inverse())
			for _, j := range checks.columns {
				decode.SetRow(j, make([]float64, v))
			}
			want.Mul(matrixOf(c), &decode)
			requireNear(t, &want, r, 1e-11)

			less, err := checks.WithoutRows(lost)
			require.NoError(t, err)
			again, err := less.Predictors(nil)
			require.NoError(t, err)
			requireNear(t, r, again, 1e-12)
		}
	}
	checks := mustChecks(t, mustCode(t, MSequence, 31), []int{1, 4})
	_, err := checks.Predictors([]int{1, 2, 3})
	var singular *SingularError
	require.ErrorAs(t, err, &singular)
	_, err = checks.Predictors([]int{31})
	require.Error(t, err)
}

// TestCompareNamesFrames: a frame that shows another row's mask, the inverted mask or
// its own, with its own throughput, is nearest to what it shows; distances are those of
// Distance and, for the true one, what noise gives.
func TestCompareNamesFrames(t *testing.T) {
	for _, snr := range []float64{10, 30} {
		m := newMiniature(t, mustCode(t, MSequence, 63), 16, 400, snr, fields["field"], 2)
		m.expose(nil)
		v, lost := 63, []int{7, 20, 41}
		inverted := make([]float32, v*m.pixels) // the clean readings of inverted masks
		for k := range v {
			for p := range m.pixels {
				sum := float32(0)
				for i := range v {
					sum += m.clean[i*m.pixels+p] / 32
				}
				inverted[k*m.pixels+p] = sum - m.clean[k*m.pixels+p]
			}
		}
		show := func(row int, from []float32, at int, factor float64) {
			for p := range m.pixels {
				mean := factor * float64(from[at*m.pixels+p])
				m.y[row*m.pixels+p] = float32(mean + math.Sqrt(mean+m.read*m.read)*m.rng.NormFloat64())
				m.s2[row*m.pixels+p] = m.y[row*m.pixels+p] + float32(m.read*m.read)
			}
		}
		show(7, m.clean, 33, 0.8)
		show(20, inverted, 20, 1.1)
		show(41, m.clean, 41, 0.7)
		g := m.gram()
		r, err := m.checks.Predictors(lost)
		require.NoError(t, err)
		for _, free := range []bool{false, true} {
			upright, turned := g.Compare(r, free), g.Compare(m.checks.Inverted(r), free)
			d, e := g.Distance(7, mat.Row(nil, 33, r))
			if !free {
				require.InEpsilon(t, d, upright.Distance.At(7, 33), 1e-7)
				require.InEpsilon(t, e, upright.Expected.At(7, 33), 1e-9)
				continue
			}
			require.Equal(t, []int{33, 41}, []int{nearest(upright, 7), nearest(upright, 41)})
			require.Equal(t, 20, nearest(turned, 20))
			require.Less(t, turned.Distance.At(20, 20), upright.Distance.At(20, nearest(upright, 20)))
			for _, x := range []struct {
				c      *Comparison
				i, m   int
				factor float64
			}{{upright, 7, 33, 0.8}, {upright, 41, 41, 0.7}, {turned, 20, 20, 1.1}} {
				scatter := math.Sqrt(2 / float64(m.pixels))
				require.InEpsilon(t, x.c.Expected.At(x.i, x.m), x.c.Distance.At(x.i, x.m), 5*scatter)
				require.InDelta(t, x.factor, x.c.Scale.At(x.i, x.m), 0.05)
			}
		}
	}
}

func nearest(c *Comparison, frame int) int {
	best := 0
	v, _ := c.Distance.Dims()
	for m := range v {
		if c.Distance.At(frame, m) < c.Distance.At(frame, best) {
			best = m
		}
	}
	return best
}
