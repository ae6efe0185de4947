package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// flatScene has no tilt, smile or trace: lines are straight columns.
func flatScene(seed uint64) *lampScene {
	return &lampScene{g: Geometry{X_c: 60, Y_c: 20, X_e: 1, L_c: 60, D: [3]float64{1}}, columns: 120, rows: 41, mirrorRows: 61, wStep: 1, mirrors: 1,
		fwhm: 3.2, read: 5, random: rand.New(rand.NewPCG(seed, 7))}
}

var wholeRule = PeakRule{FWHMPx: 3.2, BlockRows: 8, Sigmas: 8, EdgeRows: 4}

// 4 places x 400 noisy exposures of lines of 300 to 30000 e a row: centroids, widths
// and fluxes scatter as their errors say, about the truth.
func TestPeakPulls(t *testing.T) {
	lines := []sceneLine{{20.3, 300}, {43.77, 1000}, {70.5, 5000}, {96.1, 30000}}
	s := flatScene(1)
	light := s.light(0, lines)
	const trials = 100 // x 4 blocks
	for _, l := range lines {
		var sum, sum2, width, flux, n float64
		for range trials {
			e := s.expose(light)
			// The variance of an exposure is estimated from itself; weights that go with
			// the noise pull fluxes down by a fraction of an electron. Here the true one.
			for i, v := range light {
				e.Variance[i] = float32(v + s.read*s.read)
			}
			peaks, err := wholeRule.Find(e, 0, 40)
			require.NoError(t, err)
			for _, p := range peaks {
				if math.Abs(p.X-l.nm) > 2 {
					continue
				}
				rows := float64(p.LastRow - p.FirstRow + 1)
				pull := (p.X - l.nm) / p.XErr
				sum, sum2, n = sum+pull, sum2+pull*pull, n+1
				width += (p.FWHM - 3.2) / p.FWHMErr
				flux += (p.Flux - l.electrons*rows) / p.FluxErr
			}
		}
		mean, std := sum/n, math.Sqrt(sum2/n-sum*sum/n/n)
		t.Logf("line of %.0f e a row: mean pull %.3f, std %.3f; width %.3f, flux %.3f", l.electrons, mean, std, width/n, flux/n)
		// 400 samples: 5 standard errors are 0.25 and 0.18. Errors never shrink below
		// their photon noise but grow with chance misfits: a std below 1.
		require.InDelta(t, 0, mean, 0.25)
		require.InDelta(t, 0.9, std, 0.2)
		require.InDelta(t, 0, width/n, 0.3)
		require.InDelta(t, 0, flux/n, 0.3)
	}
}

// Two lines 1.3 FWHM apart, one seven times the other, and a weak one in the wing of a
// bright one.
func TestPeaksSideBySide(t *testing.T) {
	s := flatScene(2)
	lines := []sceneLine{{30.2, 20000}, {34.4, 3000}, {70.6, 40000}, {77.3, 3000}}
	peaks, err := wholeRule.Find(s.expose(s.light(0, lines)), 0, 40)
	require.NoError(t, err)
	require.Len(t, peaks, 4*4)
	for i, p := range peaks {
		want := lines[i%4]
		require.InDelta(t, want.nm, p.X, 5*p.XErr)
		require.InDelta(t, want.nm, p.X, 0.1)
		require.InDelta(t, want.electrons, p.Flux/float64(p.LastRow-p.FirstRow+1), 0.05*want.electrons)
	}
}

// What is no line: a saturated one, one at the detector's end, cosmic rays narrow and
// long, a hot column that is not marked, a pedestal that slopes.
func TestNoPeaks(t *testing.T) {
	s := flatScene(3)
	light := s.light(0, []sceneLine{{30, 20000}, {60, 8000}, {1.5, 8000}})
	for i := range light {
		light[i] += float64(i%s.columns) * 3
	}
	e := s.expose(light)
	for y := range 41 {
		e.Flags[y*120+30] |= Saturated
		e.Signal[y*120+100] += 700 // a hot column
	}
	for _, hit := range [][2]int{{80, 15}, {81, 15}, {82, 16}, {60, 22}} {
		e.Signal[hit[1]*120+hit[0]] += 9000
	}
	peaks, err := wholeRule.Find(e, 0, 40)
	require.NoError(t, err)
	require.Len(t, peaks, 4)
	for _, p := range peaks {
		require.InDelta(t, 60, p.X, 0.03)
	}
}

// Dead columns next to a line's centre leave it, one at the centre and its neighbours
// do not; a dead pixel is made good by the other rows.
func TestPeaksBesideDeadColumns(t *testing.T) {
	s := flatScene(4)
	e := s.expose(s.light(0, []sceneLine{{30.3, 9000}, {60.1, 9000}, {90.4, 9000}}))
	for y := range 41 {
		for _, x := range []int{32, 59, 60, 61} {
			e.Flags[y*120+x] |= BadPixel
			e.Signal[y*120+x] = float32(math.NaN())
		}
	}
	e.Flags[12*120+90] |= BadPixel
	e.Signal[12*120+90] = -1e6
	peaks, err := wholeRule.Find(e, 0, 40)
	require.NoError(t, err)
	require.Len(t, peaks, 4*2)
	for i, p := range peaks {
		require.InDelta(t, []float64{30.3, 90.4}[i%2], p.X, 0.03)
	}
}

func TestFindRefuses(t *testing.T) {
	s := flatScene(5)
	e := s.expose(s.light(0, nil))
	for _, c := range []struct {
		rule        PeakRule
		e           Exposure
		first, last int
		want        string
	}{
		{wholeRule, e, -1, 40, "rows -1 to 40"},
		{wholeRule, e, 0, 41, "rows 0 to 41"},
		{wholeRule, e, 9, 8, "rows 9 to 8"},
		{PeakRule{}, e, 0, 40, "width of 0 px"},
		{PeakRule{FWHMPx: math.NaN()}, e, 0, 40, "width of NaN px"},
		{wholeRule, Exposure{Columns: 7, Signal: e.Signal, Variance: e.Variance}, 0, 40, "rows of 7 pixels"},
		{wholeRule, Exposure{Columns: 120, Signal: e.Signal}, 0, 40, "0 variances"},
		{wholeRule, Exposure{}, 0, 0, "rows of 0 pixels"},
	} {
		_, err := c.rule.Find(c.e, c.first, c.last)
		require.ErrorContains(t, err, c.want)
	}
	// Nothing to see is no error, nor is a single row.
	peaks, err := wholeRule.Find(e, 3, 3)
	require.NoError(t, err)
	require.Empty(t, peaks)
}

func TestLineFWHM(t *testing.T) {
	require.Equal(t, 3.2, LineFWHM(3.2, 0))
	// A box of 2 px has variance 1/3: 8 ln 2/3 = 1.8484 in FWHM squared.
	require.InDelta(t, math.Sqrt(3.2*3.2+1.84839), LineFWHM(3.2, 2), 1e-5)
}

func BenchmarkFindPeaks(b *testing.B) {
	_, s := smallArc(1)
	e := s.expose(s.light(10, shine(neon(), s.random, 545, 675)))
	first, last := s.litRows()
	rule := DefaultPeakRule(LineFWHM(3.2, 2))
	b.SetBytes(int64(4 * len(e.Signal)))
	for b.Loop() {
		if _, err := rule.Find(e, first, last); err != nil {
			b.Fatal(err)
		}
	}
}
