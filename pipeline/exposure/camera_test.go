package exposure

import (
	"math"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
)

// twoAmplifiers is a detector of 12 x 30 pixels: overscan, data, data, overscan in a
// raw row of 20.
func twoAmplifiers() *instrument.Detector {
	return &instrument.Detector{
		Columns: 12, Rows: 30, SaturationADU: 5000,
		Amplifiers: []instrument.Amplifier{
			{Overscan: instrument.Overscan{1, 4, 1, 30}, Data: instrument.Section{5, 10, 1, 30}, GainEPerADU: 2, ReadNoiseE: 3, BiasADU: 100},
			{Data: instrument.Section{11, 16, 1, 30}, Overscan: instrument.Overscan{17, 20, 1, 30}, GainEPerADU: 0.5, ReadNoiseE: 4, BiasADU: 200},
		},
	}
}

// Each amplifier has its own level, which drifts along the rows, and gain; pixels
// come out in their active places, whole or in strips.
func TestCameraRead(t *testing.T) {
	d := twoAmplifiers()
	c, err := NewCamera(d)
	require.NoError(t, err)
	level := func(amplifier, y int) float64 { return 100*float64(1+amplifier) + 0.25*float64(y) }
	electrons := func(x, y int) float64 { return float64(10*x + y) }
	f := writeFrame(t, "f.fits", 20, 30, func(raw, y int) float32 {
		switch {
		case raw < 4:
			return float32(level(0, y))
		case raw < 10:
			return float32(level(0, y) + electrons(raw-4, y)/2)
		case raw < 16:
			return float32(level(1, y) + electrons(raw-4, y)/0.5)
		}
		return float32(level(1, y))
	})
	whole := make([]float32, 12*30)
	var s Scratch
	saturated, err := c.Read(whole, f.Image, 0, 30, &s, func([]calib.Flag, int, int, int) { t.Error("a flag") })
	require.NoError(t, err)
	require.Zero(t, saturated)
	for i, got := range whole {
		x, y := i%12, i/12
		// The level of a row is the mean over 8 rows on each side, on a slope wrong
		// where rows end on one side.
		first, last := max(0, y-8), min(29, y+8)
		gain := 2.0
		if x >= 6 {
			gain = 0.5
		}
		off := gain * 0.25 * (float64(y) - float64(first+last)/2)
		require.InDelta(t, electrons(x, y)+off, got, 1e-3, "pixel %d, %d", x, y)
	}
	for y0 := 0; y0 < 30; y0 += 7 {
		y1 := min(y0+7, 30)
		part := make([]float32, 12*(y1-y0))
		_, err := c.Read(part, f.Image, y0, y1, &s, nil)
		require.NoError(t, err)
		require.Equal(t, whole[12*y0:12*y1], part, "a strip from row %d", y0)
	}
}

// The variance of a sample without light: read noise, rounding, and the level's own
// over the 17 rows of 4 overscan pixels that it averages.
func TestCameraVariance(t *testing.T) {
	c, err := NewCamera(twoAmplifiers())
	require.NoError(t, err)
	require.InDelta(t, (9+4.0/12)*(1+1.0/68), c.Variance[3][0], 1e-12)
	require.InDelta(t, (16+0.25/12)*(1+1.0/68), c.Variance[29][11], 1e-12)
	require.Len(t, c.Variance, 30)

	d := twoAmplifiers()
	d.Amplifiers[0].Overscan = nil
	c, err = NewCamera(d)
	require.NoError(t, err)
	require.InDelta(t, 9+4.0/12, c.Variance[0][0], 1e-12)
}

// Saturated pixels are counted and Marked, and so are those without a value, which
// read as 0.
func TestCameraMarks(t *testing.T) {
	c, err := NewCamera(twoAmplifiers())
	require.NoError(t, err)
	f := writeFrame(t, "f.fits", 20, 30, func(raw, y int) float32 {
		switch {
		case raw == 6 && y == 20:
			return 5000
		case raw == 12 && y == 21:
			return float32(math.NaN())
		}
		return 100
	})
	dst, flags := make([]float32, 12*3), make([]calib.Flag, 12*3)
	var s Scratch
	saturated, err := c.Read(dst, f.Image, 19, 22, &s, func(found []calib.Flag, x, y, w int) { c.Merge(flags, 19, found, x, y, w) })
	require.NoError(t, err)
	require.Equal(t, 1, saturated)
	for i, got := range flags {
		want := calib.Flag(0)
		switch i {
		case 12*1 + 2:
			want = calib.Saturated
		case 12*2 + 8:
			want = calib.BadPixel
		}
		require.Equal(t, want, got, "pixel %d", i)
	}
	require.Zero(t, dst[12*2+8])
	require.Equal(t, float32(9800), dst[12*1+2])
}

func TestCameraRefusals(t *testing.T) {
	d := twoAmplifiers()
	d.Amplifiers[1].Overscan = instrument.Overscan{17, 20, 2, 30}
	_, err := NewCamera(d)
	require.ErrorContains(t, err, "amplifier 2 spans rows 2 to 30")
	c, err := NewCamera(twoAmplifiers())
	require.NoError(t, err)
	f := writeFrame(t, "f.fits", 20, 30, func(raw, _ int) float32 {
		if raw >= 16 {
			return float32(math.NaN())
		}
		return 100
	})
	var s Scratch
	_, err = c.Read(make([]float32, 12*30), f.Image, 0, 30, &s, func([]calib.Flag, int, int, int) {})
	require.ErrorContains(t, err, "no value in the overscan of raw row 1")
}

// writeFrame writes a raw frame, its pixels given by x and y from 0, and opens it.
func writeFrame(t testing.TB, name string, columns, rows int, value func(x, y int) float32) *Frame {
	t.Helper()
	data := make([]float32, columns*rows)
	for i := range data {
		data[i] = value(i%columns, i/columns)
	}
	path := filepath.Join(t.TempDir(), name)
	require.NoError(t, fitsutil.WriteFile(path, nil, &fitsutil.ImageData{Axes: []int{columns, rows}, Data: data}))
	file, err := fitsutil.Open(path)
	require.NoError(t, err)
	t.Cleanup(func() { require.NoError(t, file.Close()) })
	image, err := file.FirstImage()
	require.NoError(t, err)
	return &Frame{Name: name, Image: image, file: file}
}
