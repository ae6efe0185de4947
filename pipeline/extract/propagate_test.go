package extract

import (
	"context"
	"math"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// TinyRun makes a run of the tiny field: see fixture_test.go.
var TinyRun func(t *testing.T, family string, v, dark int, change ...string) string

// tinyRun opens its cube.
func tinyRun(t *testing.T, family string, v, dark int, change ...string) *Cube {
	t.Helper()
	c, err := Open(TinyRun(t, family, v, dark, change...))
	require.NoError(t, err)
	t.Cleanup(func() { c.Close() })
	return c
}

var codes = []struct {
	family  string
	v, dark int
}{{"m-sequence", 31, 8}, {"legendre", 31, 8}, {"twin-prime", 35, 12}, {"slit-scan", 23, 0}, {"singer", 31, 8}, {"singer-complement", 40, 17}}

// naive computes the covariances of all channels from the definition: every sample
// of every pixel is moved by itself, decoded, straightened and resampled as reduce
// does, and the squares of what it moves are added up.
func naive(t *testing.T, c *Cube, a *aperture, scale [][]float32) [][]float64 {
	t.Helper()
	code := c.decoder.Code()
	open, closed := code.InverseEntries()
	columns, channels := c.noise.Columns, c.Grid.Count
	reader := c.newLightReader(nil)
	out := table[float64](channels, channels)
	rows, straight, zeros := table[float32](c.Rows, columns), make([]float32, columns), make([]float32, columns)
	edges := make([]float64, channels+1)
	// resampled[i][s][x] is what one electron in column x of the straightened row of
	// source s adds to the voxels of cell i, gathers[i][s] what straightens it.
	resampled, gathers := make([][][][]float32, len(a.cells)), make([][]*calib.Gather, len(a.cells))
	for i, k := range a.cells {
		low, high := c.sourcesOf(k.element)
		for s := low; s <= high; s++ {
			c.geometry.Places(edges, float64(s), float64(k.row), c.edges)
			if c.field != nil {
				g := c.field.NewGather()
				c.field.Set(g, k.row, edges)
				gathers[i] = append(gathers[i], g)
			}
			var all [][]float32
			for x := range columns {
				voxels := calib.Voxels{Signal: make([]float32, channels), Variance: make([]float32, channels), Flags: make([]calib.Flag, channels), Stride: 1}
				clear(straight)
				straight[x] = 1
				c.resampler.Resample(voxels, straight, zeros, nil, edges)
				if c.field != nil {
					sources := table[float32](high-low+1, channels)
					copy(sources[s-low], voxels.Signal)
					c.field.Mix(voxels.Signal, sources, low, k.element)
				}
				all = append(all, voxels.Signal)
			}
			resampled[i] = append(resampled[i], all)
		}
	}
	for y := range c.Rows {
		light, err := reader.row(y)
		require.NoError(t, err)
		p, err := c.readPixels(y)
		require.NoError(t, err)
		b := block{n: columns}
		c.samples(&b, light, p)
		for x := range columns {
			// unit is what one electron of an element's light at (x, y) adds to the channels.
			unit := map[int][]float64{}
			rows[y][x] = 1
			for i, k := range a.cells {
				if first, last := c.span(k.row); y < first || y > last {
					continue
				}
				low, _ := c.sourcesOf(k.element)
				for s, resampled := range resampled[i] {
					if unit[low+s] == nil {
						unit[low+s] = make([]float64, channels)
					}
					clear(straight)
					if c.field != nil {
						gathers[i][s].Signal(straight, rows, 0)
					} else {
						c.shift.Signal(straight, rows, 0, k.row)
					}
					for l, v := range resampled[x] {
						if a.weight[i][l] != 0 {
							unit[low+s][l] += float64(scale[i][l]) * a.weight[i][l] * float64(straight[x]) * float64(v)
						}
					}
				}
			}
			rows[y][x] = 0
			if len(unit) == 0 {
				continue
			}
			add := func(moved []float64, variance float64) {
				for l, v := range moved {
					for m, w := range moved {
						out[l][m] += variance * v * w
					}
				}
			}
			level := make([]float64, channels)
			for _, u := range unit {
				for l, v := range u {
					level[l] += v
				}
			}
			add(level, float64(p.common[x]))
			for k := range code.V() {
				moved := make([]float64, channels)
				for j, u := range unit {
					entry := closed
					if code.Bit(k, c.columns[j]) == 1 {
						entry = open
					}
					for l, v := range u {
						moved[l] += entry * v
					}
				}
				add(moved, float64(b.variances[k*columns+x]))
			}
		}
	}
	return out
}

// scalesOf are the scales that give each voxel its own VARIANCE, [cell][channel].
func scalesOf(t *testing.T, c *Cube, a *aperture) [][]float32 {
	p := c.newPropagator(a)
	p.light = c.newLightReader(nil)
	var all [][]float32
	for i, k := range a.cells {
		trace, err := p.newTrace(k.row, i, i+1)
		require.NoError(t, err)
		all = append(all, trace.scale)
	}
	return all
}

// The adjoint gives what moving every sample by itself gives, for every family of
// codes: variances, covariances and those of bands; in a few elements and in all of
// them, whose coupling makes the sum of a whole row better known than its voxels say.
func TestCovariancesFromTheDefinition(t *testing.T) {
	for _, code := range codes {
		t.Run(code.family, func(t *testing.T) {
			c := tinyRun(t, code.family, code.v, code.dark)
			compareWithDefinition(t, c, "9-11,14", "7-8")
			ratio := compareWithDefinition(t, c, "0-22", "7")
			if code.family != "slit-scan" {
				require.Less(t, ratio, 0.97)
			}
		})
	}
}

// So it does on other grids and in other frames.
func TestCovariancesOnOtherAxes(t *testing.T) {
	c := tinyRun(t, "m-sequence", 31, 8, "air, log", "barycentric")
	require.False(t, c.Grid.Even())
	require.Equal(t, product.Barycentric, c.Frame.Name)
	compareWithDefinition(t, c, "9-11,14", "7-8")
}

// compareWithDefinition returns the error of the sum over all channels over what
// channels of independent elements would have.
func compareWithDefinition(t *testing.T, c *Cube, elements, rows string) (ratio float64) {
	t.Helper()
	shape, err := ParseVoxels(elements, rows)
	require.NoError(t, err)
	a, err := c.aperture(t.Context(), SpectrumOptions{Aperture: shape})
	require.NoError(t, err)
	a.plain()
	channels := c.Grid.Count
	sum, odd := make([]float64, channels), make([]float64, channels)
	for l := range channels {
		if a.weight[0][l] != 0 {
			sum[l], odd[l] = 1, math.Sin(float64(l))
		}
	}
	got, err := c.propagate(t.Context(), a, [][]float64{sum, odd})
	require.NoError(t, err)
	only, err := c.variancesOf(t.Context(), a, [][]float64{sum})
	require.NoError(t, err)
	require.InEpsilon(t, got.sums[0], only[0], 1e-12)
	requireSameChannels(t, c, a, got)
	want := naive(t, c, a, scalesOf(t, c, a))
	for l := range channels {
		for lag := range min(Lags+1, channels-l) {
			require.InDelta(t, want[l][l+lag], got.channels[l][lag], 2e-4*math.Sqrt(want[l][l]*want[l+lag][l+lag]), "channel %d lag %d", l, lag)
		}
	}
	for i, s := range [][]float64{sum, odd} {
		exact := 0.0
		for l := range channels {
			for m := range channels {
				exact += s[l] * s[m] * want[l][m]
			}
		}
		require.InEpsilon(t, exact, got.sums[i], 5e-4)
	}
	alone := 0.0
	for i, k := range a.cells {
		one := *a
		one.cells, one.slot, one.elements = []cell{k}, []int{0}, []int{k.element}
		one.signal, one.variance, one.flags, one.weight = a.signal[i:i+1], a.variance[i:i+1], a.flags[i:i+1], a.weight[i:i+1]
		one.slitVariance, one.firstRow, one.endRow = a.slitVariance[i:i+1], k.row, k.row+1
		v, err := c.variancesOf(t.Context(), &one, [][]float64{sum})
		require.NoError(t, err)
		alone += v[0]
	}
	return math.Sqrt(got.sums[0] / alone)
}

// The error of a single voxel is the root of its VARIANCE.
func TestOneVoxelHasItsVariance(t *testing.T) {
	for _, code := range codes {
		t.Run(code.family, func(t *testing.T) {
			c := tinyRun(t, code.family, code.v, code.dark)
			shape, err := ParseVoxels("12", "7")
			require.NoError(t, err)
			s, err := c.Spectrum(t.Context(), SpectrumOptions{Aperture: shape})
			require.NoError(t, err)
			a, err := c.aperture(t.Context(), SpectrumOptions{Aperture: shape})
			require.NoError(t, err)
			a.plain()
			scale := scalesOf(t, c, a)[0]
			n := 0
			for l := range s.Signal {
				if !math.IsNaN(s.Signal[l]) {
					n++
					require.InEpsilon(t, s.Naive[l], s.Error[l], 1e-4)
					// Nothing had to be scaled for that where the pixels' variance is exact.
					tolerance := 1e-3
					switch { // it depends on the light, which is interpolated
					case c.noise.Mean:
						tolerance = 0.03
					case !c.noise.Uniform:
						tolerance = 0.1
					}
					require.InDelta(t, 1, scale[l], tolerance)
				}
			}
			require.Greater(t, n, 10)
		})
	}
}

// The result does not depend on how many blocks work at the same time, and a
// cancelled context ends the work.
func TestSpectrumIsCancelled(t *testing.T) {
	c := tinyRun(t, "m-sequence", 31, 8)
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	shape, err := ParseVoxels("12", "7")
	require.NoError(t, err)
	_, err = c.Spectrum(ctx, SpectrumOptions{Aperture: shape})
	require.ErrorIs(t, err, context.Canceled)
	_, err = Open(filepath.Join(t.TempDir(), "nothing"))
	require.Error(t, err)
}

// So it does where refraction is taken out, in every family of codes, and where the field
// is shifted by a row and more from one end of the band to the other.
func TestCovariancesOfAShiftedField(t *testing.T) {
	for _, code := range codes {
		t.Run(code.family, func(t *testing.T) {
			c := tinyRun(t, code.family, code.v, code.dark, "refraction")
			require.NotNil(t, c.field)
			compareWithDefinition(t, c, "9-11,14", "7-8")
		})
	}
	c := tinyRun(t, "m-sequence", 31, 8)
	n := c.Grid.Count
	elements, rows, trace := make([]float64, n), make([]float64, n), make([]float64, c.noise.Columns)
	for l := range n {
		elements[l], rows[l] = 1.3-0.2*float64(l), -0.9+0.12*float64(l)
	}
	for x := range trace {
		trace[x] = c.geometry.TraceShift(float64(x))
	}
	var err error
	c.field, err = calib.NewShiftField(trace, elements, rows, c.Elements, c.Rows)
	require.NoError(t, err)
	compareWithDefinition(t, c, "9-11,14", "7-8")
}

// Of a cube whose refraction was taken out each voxel has its VARIANCE without scaling, but
// for the small coupling of the elements that it is made of.
func TestOneShiftedVoxelHasItsVariance(t *testing.T) {
	c := tinyRun(t, "m-sequence", 31, 8, "refraction")
	shape, err := ParseVoxels("12", "7")
	require.NoError(t, err)
	s, err := c.Spectrum(t.Context(), SpectrumOptions{Aperture: shape})
	require.NoError(t, err)
	a, err := c.aperture(t.Context(), SpectrumOptions{Aperture: shape})
	require.NoError(t, err)
	a.plain()
	scale := scalesOf(t, c, a)[0]
	n := 0
	for l := range s.Signal {
		if !math.IsNaN(s.Signal[l]) {
			n++
			require.InDelta(t, 1, scale[l], 1e-3)
			require.InEpsilon(t, s.Naive[l], s.Error[l], 0.05)
		}
	}
	require.Greater(t, n, 10)
}

// A line has the same flux on every grid, and the velocity of its frame.
func TestLinesOnOtherAxes(t *testing.T) {
	shape, err := ParseVoxels("2-20", "4-11")
	require.NoError(t, err)
	fit := func(c *Cube) Line {
		s, err := c.Spectrum(t.Context(), SpectrumOptions{Aperture: shape, Lines: &LineOptions{RestNM: []float64{499.216}, WindowNM: 2.2}})
		require.NoError(t, err)
		require.Len(t, s.Lines, 1)
		return s.Lines[0]
	}
	log, other := tinyRun(t, "m-sequence", 31, 8, "air, log"), tinyRun(t, "m-sequence", 31, 8, "air, log", "barycentric")
	plain, want, got := fit(tinyRun(t, "m-sequence", 31, 8)), fit(log), fit(other)
	require.Greater(t, want.Flux, 10*want.FluxErr)
	// Other voxels have other parts of the same noise, by half an error or so.
	require.InDelta(t, plain.Flux, want.Flux, plain.FluxErr)
	require.InDelta(t, plain.Velocity, want.Velocity, plain.VelocityErr)
	require.InEpsilon(t, want.Flux, got.Flux, 0.005)
	frame := other.Frame.VelocityMS() / 1000
	require.InDelta(t, want.Velocity-frame, got.Velocity, 3)
	require.Greater(t, math.Abs(frame), 5.0) // so that a wrong sign would show
}

// An image of a shifted field has the errors that the propagation has.
func TestImageOfAShiftedField(t *testing.T) {
	c := tinyRun(t, "m-sequence", 31, 8, "refraction")
	g := c.Grid
	band := Band{FromNM: g.WavelengthNM(3), ToNM: g.WavelengthNM(11)}
	im, err := c.Image(t.Context(), band, func(int) {})
	require.NoError(t, err)
	shape, err := ParseVoxels("12", "7")
	require.NoError(t, err)
	s, err := c.Spectrum(t.Context(), SpectrumOptions{Aperture: shape, Bands: []Band{band}})
	require.NoError(t, err)
	at := 7*c.Elements + 12
	require.InEpsilon(t, s.Bands[0].Signal, float64(im.Signal[at]), 1e-4)
	require.InEpsilon(t, s.Bands[0].Error, float64(im.Error[at]), 0.05) // without the elements' coupling
}
