package extract

import (
	"bytes"
	"image/png"
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// By hand from the cube's WCS: at the position angle t of the second axis north lies t from it,
// clockwise where east is towards smaller elements (CD as in the FITS Standard 4.0, section 8.1).
func TestTowards(t *testing.T) {
	const degrees = 20.0
	sin, cos := math.Sincos(degrees * math.Pi / 180)
	const c1, c2 = 0.6 / arcsecPerDeg, 0.28 / arcsecPerDeg
	s := &sky{cd: [2][2]float64{{-c1 * cos, c2 * sin}, {c1 * sin, c2 * cos}}}
	x, y := s.towards(0, 1)
	require.InDelta(t, sin, x, 1e-6)
	require.InDelta(t, cos, y, 1e-6)
	x, y = s.towards(1, 0)
	require.InDelta(t, -cos, x, 1e-6)
	require.InDelta(t, sin, y, 1e-6)
}

// Places without data have their colour and no other has it.
func TestMapShowsNoData(t *testing.T) {
	c := &Cube{}
	c.Elements, c.Rows = 4, 6
	c.sky = &sky{cd: [2][2]float64{{-1.0 / arcsecPerDeg, 0}, {0, 1.0 / arcsecPerDeg}}, refX: 1.5, refY: 2.5}
	tan := func(missing int) (count int) {
		values := make([]float32, 24)
		for i := range values {
			values[i] = float32(i)
			if i < missing {
				values[i] = float32(math.NaN())
			}
		}
		var b bytes.Buffer
		require.NoError(t, c.drawMap(&b, values, "light"))
		im, err := png.Decode(&b)
		require.NoError(t, err)
		r0, g0, b0, _ := noData.RGBA()
		for y := range im.Bounds().Dy() {
			for x := range im.Bounds().Dx() {
				if r, g, b, _ := im.At(x, y).RGBA(); r == r0 && g == g0 && b == b0 {
					count++
				}
			}
		}
		return count
	}
	key, half := tan(0), tan(12)
	require.Positive(t, key, "the key is there")
	require.Greater(t, half, 20*key)
}

// A spectrum near 0 has its axis from 0, has a title, and marks what is poorly covered.
func TestSpectrumPlot(t *testing.T) {
	s := &Spectrum{}
	for l := range 40 {
		s.WavelengthNM = append(s.WavelengthNM, 500+float64(l))
		s.Signal, s.Error = append(s.Signal, 233+500*math.Exp(-float64((l-20)*(l-20))/20)), append(s.Error, 3)
		s.Coverage = append(s.Coverage, 1)
	}
	draw := func() string {
		var b bytes.Buffer
		require.NoError(t, s.plot(&b, "spectrum of a circle", "ct"))
		return b.String()
	}
	text := draw()
	require.Contains(t, text, "spectrum of a circle")
	require.Contains(t, text, ">0</text>")
	require.NotContains(t, text, "of the aperture is good")
	s.Coverage[7], s.Coverage[8] = 0.6, 0.7
	marked := draw()
	require.Equal(t, 1, strings.Count(marked, "less than 90 % of the aperture is good"))
	for l := range s.Signal {
		s.Signal[l] += 5000
	}
	require.NotContains(t, draw(), ">0</text>", "far from 0")
}
