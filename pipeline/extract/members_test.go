package extract

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

// TinyPair combines two nights in a folder, TinyCycles the cycles of one: see
// fixture_test.go.
var (
	TinyPair   func(t *testing.T, dir string, elements, rows float64, family string, v, dark int, change ...string)
	TinyCycles func(t *testing.T, dir string)
)

func openRun(t *testing.T, run string) *Cube {
	t.Helper()
	c, err := Open(run)
	require.NoError(t, err)
	t.Cleanup(func() { c.Close() })
	return c
}

func listed(t *testing.T, c *Cube, elements, rows string) *aperture {
	t.Helper()
	shape, err := ParseVoxels(elements, rows)
	require.NoError(t, err)
	a, err := c.aperture(t.Context(), SpectrumOptions{Aperture: shape})
	require.NoError(t, err)
	return a
}

// definition is what moving every sample of every run by itself gives, the shares of the
// runs worked out from their own VARIANCE and FLAGS. It checks that SIGNAL is that mean.
func definition(t *testing.T, c *Cube, a *aperture) (covariance [][]float64, both int) {
	t.Helper()
	channels := c.Grid.Count
	covariance = table[float64](channels, channels)
	mean, total, counted := table[float64](len(a.cells), channels), table[float64](len(a.cells), channels), table[int](len(a.cells), channels)
	var parts []*aperture
	var from [][]int
	for _, m := range c.members {
		var cells []cell
		var at []int
		for i, k := range a.cells {
			k.element, k.row = k.element-m.element, k.row-m.row
			if k.element >= 0 && k.element < m.Elements && k.row >= 0 && k.row < m.Rows {
				cells, at = append(cells, k), append(at, i)
			}
		}
		if cells == nil {
			parts, from = append(parts, nil), append(from, nil)
			continue
		}
		own, err := m.load(t.Context(), cells)
		require.NoError(t, err)
		for k, i := range at {
			for l := range channels {
				if own.flags[k][l]&product.FlagBad == 0 {
					own.weight[k][l] = 1 / float64(own.variance[k][l])
					total[i][l] += own.weight[k][l]
					counted[i][l]++
				}
			}
		}
		parts, from = append(parts, own), append(from, at)
	}
	for p, own := range parts {
		if own == nil {
			continue
		}
		for k, i := range from[p] {
			for l := range channels {
				if own.weight[k][l] == 0 {
					continue
				}
				share := own.weight[k][l] / total[i][l]
				mean[i][l] += share * float64(own.signal[k][l])
				own.weight[k][l] = share * a.weight[i][l]
			}
		}
		m := c.members[p].Cube
		for l, row := range naive(t, m, own, scalesOf(t, m, own)) {
			for k, v := range row {
				covariance[l][k] += v
			}
		}
	}
	for i := range a.cells {
		for l := range channels {
			if a.weight[i][l] != 0 {
				require.InEpsilon(t, mean[i][l], a.signal[i][l], 1e-5)
				if counted[i][l] == 2 {
					both++
				}
			}
		}
	}
	return covariance, both
}

// Covariances of a combined cube are those of the definition: for cells that both runs
// have, that one has, and across the border.
func TestCovariancesOfACombination(t *testing.T) {
	for _, code := range []struct {
		family  string
		v, dark int
	}{{"m-sequence", 31, 8}, {"singer", 31, 8}} {
		dir := t.TempDir()
		TinyPair(t, dir, 2, -1, code.family, code.v, code.dark)
		c := openRun(t, filepath.Join(dir, "all"))
		require.Equal(t, 2, c.Runs())
		for _, cells := range []struct {
			elements, rows string
			both           bool
		}{{"9-11,14", "7-8", true}, {"0-4", "8", true}, {"0-1", "7-9", false}} {
			t.Run(fmt.Sprint(code.family, cells), func(t *testing.T) {
				a := listed(t, c, cells.elements, cells.rows)
				a.plain()
				want, both := definition(t, c, a)
				require.Equal(t, cells.both, both > 0)
				channels := c.Grid.Count
				odd := make([]float64, channels)
				exact := 0.0
				for l := range odd {
					if want[l][l] > 0 {
						odd[l] = 1.5 + math.Sin(float64(l))
					}
				}
				got, err := c.propagate(t.Context(), a, [][]float64{odd})
				require.NoError(t, err)
				for l := range channels {
					for lag := range min(Lags+1, channels-l) {
						require.InDelta(t, want[l][l+lag], got.channels[l][lag], 2e-4*math.Sqrt(want[l][l]*want[l+lag][l+lag]), "channel %d lag %d", l, lag)
					}
					for m := range channels {
						exact += odd[l] * odd[m] * want[l][m]
					}
				}
				require.Positive(t, exact)
				require.InEpsilon(t, exact, got.sums[0], 5e-4)
				only, err := c.variancesOf(t.Context(), a, [][]float64{odd})
				require.NoError(t, err)
				require.InEpsilon(t, got.sums[0], only[0], 1e-12)
			})
		}
		combinedVoxels(t, c)
	}
}

// combinedVoxels checks single voxels: their errors are the root of VARIANCE; where one run
// alone has them, image and lines are that run's, and where both have, they are those of a
// spectrum of the voxel.
func combinedVoxels(t *testing.T, c *Cube) {
	first := c.members[0]
	g := c.Grid
	band := Band{FromNM: g.WavelengthNM(3), ToNM: g.WavelengthNM(11)}
	lines := LineOptions{RestNM: []float64{499.216}, WindowNM: 2.2, MinSN: 3}
	im, err := c.Image(t.Context(), band, func(int) {})
	require.NoError(t, err)
	m, err := c.Lines(t.Context(), lines, func(int) {})
	require.NoError(t, err)
	alone, err := first.Image(t.Context(), band, func(int) {})
	require.NoError(t, err)
	aloneLines, err := first.Lines(t.Context(), lines, func(int) {})
	require.NoError(t, err)
	shown := 0
	for y := 4; y < 11; y++ { // the second run begins two elements further on
		at, own := y*c.Elements+1, (y-first.row)*first.Elements+1-first.element
		if isNaN(alone.Signal[own]) {
			continue
		}
		shown++
		require.Equal(t, alone.Signal[own], im.Signal[at])
		require.InEpsilon(t, alone.Error[own], im.Error[at], 1e-6)
		require.InEpsilon(t, aloneLines.Lines[own][0].FluxErr, m.Lines[at][0].FluxErr, 1e-6)
	}
	require.Greater(t, shown, 3)
	for _, j := range []int{6, 12, 17} {
		shape, err := ParseVoxels(fmt.Sprint(j), "7")
		require.NoError(t, err)
		s, err := c.Spectrum(t.Context(), SpectrumOptions{Aperture: shape, Bands: []Band{band}, Lines: &lines})
		require.NoError(t, err)
		for l, v := range s.Signal {
			if !math.IsNaN(v) {
				require.InEpsilon(t, s.Naive[l], s.Error[l], 1e-4)
			}
		}
		at := 7*c.Elements + j
		require.InEpsilon(t, s.Bands[0].Signal, float64(im.Signal[at]), 1e-4)
		require.InEpsilon(t, s.Bands[0].Naive, float64(im.Naive[at]), 1e-4)
		// An image leaves out the coupling of the elements; the pixels of a slit scan or
		// of a sparse code count alike in it.
		require.InEpsilon(t, s.Bands[0].Error, float64(im.Error[at]), 0.05)
		require.InEpsilon(t, s.Lines[0].FluxErr, m.Lines[at][0].FluxErr, 0.05)
		require.NotEqual(t, im.Naive[at], im.Error[at])
	}
}

// Two cycles combined are what they are when they are reduced at once, but for shares that
// differ a little from one half; errors of sums as well.
func TestCyclesCombinedAreTheNight(t *testing.T) {
	dir := t.TempDir()
	TinyCycles(t, dir)
	all, both := openRun(t, filepath.Join(dir, "all")), openRun(t, filepath.Join(dir, "both"))
	shape, err := ParseVoxels("5-14", "5-9")
	require.NoError(t, err)
	for _, optimal := range []bool{false, true} {
		o := SpectrumOptions{Aperture: shape, Optimal: optimal}
		got, err := all.Spectrum(t.Context(), o)
		require.NoError(t, err)
		want, err := both.Spectrum(t.Context(), o)
		require.NoError(t, err)
		n := 0
		for l, v := range want.Signal {
			if !math.IsNaN(v) {
				n++
				require.InDelta(t, v, got.Signal[l], 0.3*want.Error[l])
				require.InEpsilon(t, want.Error[l], got.Error[l], 0.02)
				require.InEpsilon(t, want.Naive[l], got.Naive[l], 0.02)
			}
		}
		require.Greater(t, n, 10)
	}
}

// A combined cube whose runs are gone or others now says so.
func TestRunsOfACombinationAreChecked(t *testing.T) {
	dir := t.TempDir()
	TinyPair(t, dir, 1, 1, "m-sequence", 31, 8)
	// It is the place as seen from the combined run that counts.
	moved := filepath.Join(t.TempDir(), "moved")
	require.NoError(t, os.Rename(dir, moved))
	all, second := filepath.Join(moved, "all"), filepath.Join(moved, "run1")
	openRun(t, all)
	require.NoError(t, os.Rename(second, second+"x"))
	_, err := Open(all)
	require.ErrorIs(t, err, os.ErrNotExist)
	require.ErrorContains(t, err, "is made of the run "+second)
	require.ErrorContains(t, err, "put the run back, or combine the runs again")
	require.NoError(t, os.CopyFS(second, os.DirFS(filepath.Join(moved, "run0"))))
	_, err = Open(all)
	require.ErrorContains(t, err, "another cube now; combine the runs again")
}

// Nights whose observers move otherwise have one frame of wavelengths together, and no
// observer's velocity; each run's voxels lie on its detector by its own.
func TestCombinationOfTwoVelocities(t *testing.T) {
	dir := t.TempDir()
	TinyPair(t, dir, 2, -1, "m-sequence", 31, 8, "barycentric")
	c := openRun(t, filepath.Join(dir, "all"))
	require.Equal(t, product.Barycentric, c.Frame.Name)
	require.False(t, c.observed)
	first, second := c.members[0], c.members[1]
	require.True(t, first.observed)
	require.Greater(t, math.Abs(first.Frame.VelocityMS()-second.Frame.VelocityMS()), 5000.0)
	a := listed(t, c, "9-11", "7-8")
	a.plain()
	want, both := definition(t, c, a)
	require.Positive(t, both)
	got, err := c.propagate(t.Context(), a, nil)
	require.NoError(t, err)
	for l := range want {
		require.InDelta(t, want[l][l], got.channels[l][0], 2e-4*want[l][l])
	}
	h, err := c.primary()
	require.NoError(t, err)
	require.True(t, h.Has("SPECSYS"))
	require.False(t, h.Has(observerVelocity))
	n, err := h.Int(runsCard)
	require.NoError(t, err)
	require.EqualValues(t, 2, n)
}
