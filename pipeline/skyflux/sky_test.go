package skyflux

import (
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

// field is a made-up cube: a sky of 40 with lines at voxels 30 and 31, a star, a nebula
// that shows at voxel 50 alone, and the slit's end in row 0.
const (
	fieldElements, fieldRows, fieldVoxels = 40, 48, 64
	fieldBytes                            = 64 << 20
)

func fieldSky(l int) float64 {
	switch l {
	case 30:
		return 240
	case 31:
		return 140
	}
	return 40
}

func fieldSource(l, y, j int) float64 {
	star := 4000 * math.Exp(-(math.Pow(float64(y-20), 2)/8 + math.Pow(float64(j-12), 2)/4))
	if l == 50 {
		star += 60 * math.Exp(-(math.Pow(float64(y-34), 2)+math.Pow(float64(j-30), 2))/18)
	}
	return star
}

func fieldPart() []float32 {
	part := make([]float32, fieldElements*fieldRows)
	for i := range part {
		part[i] = 1
		if i < fieldElements {
			part[i] = 0.5
		}
	}
	return part
}

func fieldSchema() product.Schema {
	return product.Schema{Elements: fieldElements, Rows: fieldRows, Grid: instrument.Grid{FirstNM: 500, StepNM: 0.5, Count: fieldVoxels},
		RADeg: 123, DecDeg: 20, RowCenter: 24, Parity: 1, C1Deg: 1e-4, C2Deg: 1e-4}
}

// imagesOf are those of a cube with one image more than Schema's.
func imagesOf(t *testing.T, done product.OnSky) []fitsutil.ImageSpec {
	t.Helper()
	specs, err := fieldSchema().ImagesOnSky(done)
	require.NoError(t, err)
	specs = append(specs, fitsutil.ImageSpec{Name: product.PixelVariance, BITPIX: -32, Axes: []int{7, 5, 2}})
	if done.Sky != nil {
		specs = append(specs, fitsutil.ImageSpec{Name: product.SkyShare, BITPIX: -32, Axes: []int{fieldElements, fieldRows, 2}})
	}
	return specs
}

// writeField writes the cube with noise; element 39 has data in half of the band only,
// and one voxel is bad.
func writeField(t *testing.T, seed uint64) string {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 3))
	path := filepath.Join(t.TempDir(), product.CubeFile)
	cube, err := fitsutil.CreateCube(path, nil, imagesOf(t, product.OnSky{}))
	require.NoError(t, err)
	defer cube.Abort() // nothing after Commit
	part := fieldPart()
	n := fieldElements * fieldRows
	signal, variance, scale, flags := make([]float32, n), make([]float32, n), make([]float32, n), make([]int16, n)
	for l := range fieldVoxels {
		for i := range n {
			light := float64(part[i])*fieldSky(l) + fieldSource(l, i/fieldElements, i%fieldElements)
			variance[i], scale[i], flags[i] = float32(20+light), 1, 0
			signal[i] = float32(light + math.Sqrt(20+light)*rng.NormFloat64())
			if i%fieldElements == 39 && l < 40 {
				signal[i], variance[i], flags[i] = float32(math.NaN()), float32(math.NaN()), product.FlagNoData
			}
			if i == 1000 && l == 5 {
				signal[i], flags[i] = 1e6, product.FlagBadPixel
			}
		}
		for k, data := range []any{signal, variance, flags, scale} {
			require.NoError(t, cube.WriteStrip(k, 0, fieldRows, l, 1, data))
		}
	}
	rest := make([]float32, 70)
	for i := range rest {
		rest[i] = float32(i)
	}
	require.NoError(t, cube.WriteStrip(4, 0, 5, 0, 2, rest))
	require.NoError(t, cube.Commit())
	return path
}

// write makes the cube anew and gives its path.
func write(t *testing.T, s *Source, sky *Sky, flux *calib.FluxScale, o Options) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "out.fits")
	var done product.OnSky
	if sky != nil {
		done.Sky = &sky.Record
	}
	cube, err := fitsutil.CreateCube(path, nil, imagesOf(t, done))
	require.NoError(t, err)
	defer cube.Abort() // nothing after Commit
	_, _, err = s.Write(t.Context(), cube, sky, flux, o)
	require.NoError(t, err)
	if sky != nil {
		require.NoError(t, cube.AppendTable(sky.Record.Table()))
	}
	require.NoError(t, cube.Commit())
	return path
}

// The blind sky holds neither star nor nebula nor the slit's end nor what lacks half of the
// band; what is left is 0 with the errors said; bytes do not depend on workers.
func TestSkyOfField(t *testing.T) {
	var square, sum, n, lines, linesN float64
	for seed := range uint64(4) {
		source, err := Open(writeField(t, seed))
		require.NoError(t, err)
		defer source.Close()
		o := Options{MemoryBytes: fieldBytes, Workers: 1}
		sky, err := source.MeasureSky(t.Context(), Names{}, fieldPart(), 1, o)
		require.NoError(t, err)
		require.Greater(t, sky.Report.Places, 800)
		nebula := 0.0
		for i, blank := range sky.Blank {
			y, j := i/fieldElements, i%fieldElements
			if blank {
				require.Less(t, fieldSource(50, y, j), 1.5*math.Sqrt(60.0), "place %d", i)
				nebula += fieldSource(50, y, j) / float64(sky.Report.Places)
				require.Positive(t, y)
				require.Less(t, j, 39)
			}
		}
		require.Less(t, nebula, math.Sqrt(sky.Record.Variance[50]))
		require.True(t, sky.Record.Line[30] && sky.Record.Line[31])
		require.Equal(t, 2, sky.Report.Lines)
		require.InDelta(t, 1, sky.Report.Chi2, 0.02)
		path := write(t, source, sky, nil, o)
		o.Workers = 3
		again, err := source.MeasureSky(t.Context(), Names{}, fieldPart(), 1, o)
		require.NoError(t, err)
		a, err := os.ReadFile(path)
		require.NoError(t, err)
		b, err := os.ReadFile(write(t, source, again, nil, o))
		require.NoError(t, err)
		require.True(t, string(a) == string(b), "bytes depend on workers")
		out, err := Open(path)
		require.NoError(t, err)
		defer out.Close()
		p := out.newPlane()
		for l := range fieldVoxels {
			require.NoError(t, out.read(p, l))
			for i := range p.signal {
				y, j := i/fieldElements, i%fieldElements
				if !p.good(i) {
					continue
				}
				pull := (float64(p.signal[i]) - fieldSource(l, y, j)) / math.Sqrt(float64(p.variance[i]))
				square, sum, n = square+pull*pull, sum+pull, n+1
				if l == 30 || l == 31 {
					require.NotZero(t, p.flags[i]&product.FlagSkyLine)
					lines, linesN = lines+pull, linesN+1
				}
			}
		}
		read, err := product.ReadOnSky(out.file)
		require.NoError(t, err)
		require.Equal(t, sky.Record.Line, read.Sky.Line)
		require.Equal(t, sky.Record.Places, read.Sky.Places)
		require.Nil(t, read.Flux)
		rest, err := out.file.ImageNamed(product.PixelVariance)
		require.NoError(t, err)
		row := make([]float32, 7)
		require.NoError(t, rest.ReadPlaneRows(row, 1, 4, 5))
		require.Equal(t, float32(63), row[0])
	}
	// The sky is one number a wavelength: 4 x 64 and 4 x 2 independent samples of it, whose
	// error is below 1/sqrt(800 places) of a voxel's.
	require.InDelta(t, 0, sum/n, 3*math.Sqrt(1/n+1.0/800/(4*64)))
	require.InDelta(t, 0, lines/linesN, 3*math.Sqrt(1/linesN+1.0/800/(4*2)))
	require.InDelta(t, 1, math.Sqrt(square/n), 0.01)
}

// Named places are taken, if they are usable; what cannot be is refused with the cure.
func TestNamedSky(t *testing.T) {
	source, err := Open(writeField(t, 1))
	require.NoError(t, err)
	defer source.Close()
	o := Options{MemoryBytes: fieldBytes, Workers: 2}
	sky, err := source.MeasureSky(t.Context(), Names{Elements: [][2]int{{20, 22}, {25, 25}}, Rows: [][2]int{{0, 9}}}, fieldPart(), 1, o)
	require.NoError(t, err)
	require.Equal(t, 4*9, sky.Report.Places) // row 0 is the slit's end
	require.Equal(t, "by name", sky.Report.Chosen)
	require.InDelta(t, 40, sky.Record.Value[10], 5*math.Sqrt(60.0/36))
	_, err = source.MeasureSky(t.Context(), Names{Elements: [][2]int{{39, 39}}}, fieldPart(), 1, o)
	require.ErrorContains(t, err, "hold 0 places that are good in half of the band, 8 are the least; name others")
	_, err = source.MeasureSky(t.Context(), Names{}, fieldPart(), 1, Options{MemoryBytes: 1000})
	require.ErrorContains(t, err, "40 elements and 48 rows need 1 MiB of memory; give --memory 1 MiB more")
}
