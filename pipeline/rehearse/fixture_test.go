package rehearse

import (
	"context"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// smallProfile cuts an embedded profile down to a small detector, device and
// band around the same centre.
func smallProfile(t testing.TB, name string) *instrument.Profile {
	return cutProfile(t, name, 160, 56, 90)
}

// cutProfile cuts a profile to so many detector columns and rows and voxels, and
// the device to what lights most of the rows.
func cutProfile(t testing.TB, name string, columns, rows, voxels int) *instrument.Profile {
	p, err := instrument.Load(name)
	require.NoError(t, err)
	d, s := &p.Detector, &p.Spectrograph
	d.Columns, d.Rows = columns, rows
	s.XCenterPx, s.YCenterPx = float64(columns-1)/2, float64(rows-1)/2
	if p.DMD.Mounting == instrument.Diagonal {
		d.Amplifiers[0].Data = instrument.Section{1, columns, 1, rows}
		p.DMD.Columns, p.DMD.Rows = rows-12, rows-12
	} else {
		half := columns / 2
		d.Amplifiers[0].Data, d.Amplifiers[0].Overscan = instrument.Section{1, half, 1, rows}, instrument.Overscan{columns + 1, columns + 16, 1, rows}
		d.Amplifiers[1].Data, d.Amplifiers[1].Overscan = instrument.Section{half + 1, columns, 1, rows}, instrument.Overscan{columns + 17, columns + 32, 1, rows}
		p.DMD.Columns, p.DMD.Rows = 48, rows-16
	}
	p.Grid.Count = voxels
	p.Grid.FirstNM = s.CenterNM - p.Grid.StepNM*float64(p.Grid.Count-1)/2
	edge := p.Grid.StepNM * float64(p.Grid.Count) / 2
	s.Throughput = instrument.Curve{
		{WavelengthNM: s.CenterNM - edge - 3, Fraction: 0}, {WavelengthNM: s.CenterNM - edge, Fraction: 0.3},
		{WavelengthNM: s.CenterNM + edge, Fraction: 0.34}, {WavelengthNM: s.CenterNM + edge + 3, Fraction: 0},
	}
	require.NoError(t, p.Validate())
	return p
}

// smallTarget asks for a code of 15 with 3 dark columns and a few frames of each
// kind.
func smallTarget(p *instrument.Profile) *sequence.Target {
	v, dark := 15, 3
	lamp := "NeKrXeHg"
	if p.DMD.Mounting == instrument.Diagonal {
		lamp = "KrXe"
	}
	return &sequence.Target{
		Name: "small field", RADeg: 100, DecDeg: -20, RotangDeg: 37, StartUTC: "2031-01-05T03:00:00Z",
		Code:         sequence.CodeChoice{Family: "m-sequence", V: &v, Dark: &dark, ElementMirrors: 2, Order: sequence.OrderShuffled, Seed: 5, Cycles: 1},
		DwellSeconds: 60, AllOffEvery: 5,
		Calibration: sequence.Calibration{
			Bias: sequence.BiasFrames{Count: 4}, Dark: sequence.DarkFrames{Count: 3, DwellSeconds: 60},
			Flat: sequence.FlatFrames{Count: 2, DwellSeconds: 5, Lamp: "halogen", CodedCycles: 1},
			Arc:  sequence.ArcFrames{Count: 1, DwellSeconds: 5, Lamp: lamp, Every: 5},
		},
	}
}

// planned builds a sequence and names its masks by writing it.
func planned(t testing.TB, p *instrument.Profile, target *sequence.Target) *sequence.Sequence {
	seq, _, err := plan.Build(context.Background(), target, p)
	require.NoError(t, err)
	require.NoError(t, seq.Write(context.Background(), filepath.Join(t.TempDir(), "seq")))
	return seq
}

func ptr(x float64) *float64 { return &x }

// smallScene has a star, a ring with lines, and a sky with a line, bright enough
// for tests of a few pixels; nm is the band's centre.
func smallScene(nm float64) *Scene {
	return &Scene{
		SeeingFWHMArcsec: 1.2,
		Sources: []Source{
			{Kind: KindStar, EastArcsec: 0.9, NorthArcsec: -1.4, ABMag: ptr(14.5), AtNM: nm, TemperatureK: 7000},
			{Kind: KindRing, RadiusArcsec: 2, WidthArcsec: 1.5, Lines: []Line{{WavelengthNM: nm + 4, FluxWM2: 2e-16, FWHMKmS: 50}},
				Velocity: Velocity{SystemicKmS: 30, GradientKmSArcsec: 10, PADeg: 60}},
		},
		Sky: Sky{ContinuumABArcsec2: ptr(19), Lines: []SkyLine{{WavelengthNM: nm - 6, FluxWM2Arcsec2: 3e-18}}},
	}
}

// night runs a rehearsal into a folder of its own.
func rehearsed(t testing.TB, seq *sequence.Sequence, scene *Scene, opts Options) (dir string, summary *Summary) {
	dir = filepath.Join(t.TempDir(), "night")
	require.NoError(t, os.Mkdir(dir, 0o777))
	summary, err := Run(context.Background(), seq, scene, opts, dir, nil)
	require.NoError(t, err)
	return dir, summary
}

// frame reads the samples of a step, counted from 0, in ADU.
func frame(t testing.TB, dir string, step int) (pixels []float32, columns, rows int) {
	f, err := fitsutil.Open(filepath.Join(dir, FrameFile(step+1)))
	require.NoError(t, err)
	defer f.Close()
	im, err := f.FirstImage()
	require.NoError(t, err)
	pixels = make([]float32, im.Width()*im.Height())
	require.NoError(t, im.ReadRows(pixels, 0, im.Height()))
	return pixels, im.Width(), im.Height()
}

// electrons reads a step's active pixels as electrons above the bias of another
// step.
func electrons(t testing.TB, dir string, seq *sequence.Sequence, step, bias int) [][]float64 {
	light, columns, _ := frame(t, dir, step)
	level, _, _ := frame(t, dir, bias)
	d := seq.Profile.Detector
	image := make([][]float64, d.Rows)
	for y := range image {
		image[y] = make([]float64, d.Columns)
	}
	for a, place := range d.Active() {
		x0, x1, y0, y1 := place.Raw.Bounds0()
		for y := y0; y < y1; y++ {
			for x := x0; x < x1; x++ {
				value := float64(light[y*columns+x] - level[y*columns+x])
				image[place.Y0+y-y0][place.X0+x-x0] = value * d.Amplifiers[a].GainEPerADU
			}
		}
	}
	return image
}

// truth reads an image of truth.fits as [voxel][row][element].
func truth(t testing.TB, dir, name string) (values []float32, n, rows, voxels int) {
	f, err := fitsutil.Open(filepath.Join(dir, TruthFolder, TruthFile))
	require.NoError(t, err)
	defer f.Close()
	im, err := f.ImageNamed(name)
	require.NoError(t, err)
	values = make([]float32, im.Axes[0]*im.Axes[1]*im.Axes[2])
	for l := range im.Axes[2] {
		plane := im.Axes[0] * im.Axes[1]
		require.NoError(t, im.ReadPlaneRows(values[l*plane:(l+1)*plane], l, 0, im.Axes[1]))
	}
	return values, im.Axes[0], im.Axes[1], im.Axes[2]
}
