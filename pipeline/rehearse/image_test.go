package rehearse

import (
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

func numbers(t *testing.T, text string) []float64 {
	var list []float64
	for _, word := range strings.Fields(text) {
		x, err := strconv.ParseFloat(word, 64)
		require.NoError(t, err)
		list = append(list, x)
	}
	return list
}

func words(values []float64) []string {
	list := make([]string, len(values))
	for i, v := range values {
		list[i] = fmt.Sprint(v)
	}
	return list
}

func TestCrosscheckBessel(t *testing.T) {
	at := []float64{0, 0.01, 0.5, 1, 2, 3.7, 3.75, 3.8, 5, 10, 100, 1e4}
	want := numbers(t, outside.Python(t, "rehearse_values.py", append([]string{"bessel"}, words(at)...)...))
	for i, x := range at {
		require.InEpsilon(t, want[i], besselI0Scaled(x), 5e-7, x)
	}
}

// The blurred profiles of rings and galaxies against a sum over the plane.
func TestCrosscheckBlur(t *testing.T) {
	f := &field{columns: 200, rows: 200, arcsecPerMirror: 0.5, arcsecPerU: 0.5, cos: 1, parity: 1}
	const seeing = 1.3
	radii := []float64{0, 0.3, 1.1, 4.7, 10.2, 14}
	args := []string{"blur", fmt.Sprint(seeing / 2.35482004503 / 0.5), strings.Join(words(radii), ",")}
	sources := []Source{
		{Kind: KindRing, RadiusArcsec: 6, WidthArcsec: 2},
		{Kind: KindRing, RadiusArcsec: 1, WidthArcsec: 3},
		{Kind: KindGalaxy, RadiusArcsec: 1.2},
		{Kind: KindGalaxy, RadiusArcsec: 0.3},
	}
	for _, s := range sources {
		args = append(args, s.Kind, fmt.Sprint(s.RadiusArcsec/0.5), fmt.Sprint(s.WidthArcsec/2.35482004503/0.5))
	}
	want := numbers(t, outside.Python(t, "rehearse_values.py", args...))
	for k, source := range sources {
		im := f.imageOf(&source, seeing, 0, 0).(*radialImage)
		at := want[k*len(radii):][:len(radii)]
		for i, r := range radii {
			require.InDelta(t, at[i], im.at(r), 2e-6*slices.Max(at), "%s at %v", source.Kind, r)
		}
	}
}

// Every image gives all mirrors together 1.
func TestFractionsSumToOne(t *testing.T) {
	for _, diagonal := range []bool{false, true} {
		f := &field{columns: 120, rows: 120, diagonal: diagonal, arcsecPerMirror: 0.4, arcsecPerU: 0.4, uMiddle: 59.5, wMiddle: 59.5, cos: 0.8, sin: 0.6, parity: -1}
		if diagonal {
			f.arcsecPerU, f.uMiddle, f.wMiddle = 0.4/math.Sqrt2, 119, 0
		}
		for _, source := range []Source{
			{Kind: KindStar, EastArcsec: 2, NorthArcsec: 1.3},
			{Kind: KindGaussian, EastArcsec: -2, WidthArcsec: 3},
			{Kind: KindRing, NorthArcsec: 1, RadiusArcsec: 6, WidthArcsec: 2},
			{Kind: KindGalaxy, RadiusArcsec: 0.8},
		} {
			im := f.imageOf(&source, 1, 0, 0)
			sum, column, row := 0.0, 0.0, 0.0
			for c := range f.columns {
				for r := range f.rows {
					p := im.fraction(float64(c), float64(r))
					sum += p
					column += p * float64(c)
					row += p * float64(r)
				}
			}
			require.InDelta(t, 1, sum, 1e-5, source.Kind)
			u, w := column, row
			if diagonal {
				u, w = column+row, row-column
			}
			east, north := f.sky((u-f.uMiddle)*f.arcsecPerU, (w-f.wMiddle)*f.arcsecPerU)
			require.InDelta(t, source.EastArcsec, east, 1e-3, source.Kind)
			require.InDelta(t, source.NorthArcsec, north, 1e-3, source.Kind)
		}
	}
}

// A star's share of a mirror, by hand: seeing sigma 1 mirror, the star on the
// mirror's centre: erf(0.5/sqrt 2)^2 = 0.38292492^2.
func TestStarFraction(t *testing.T) {
	g := gaussianImage{column: 5, row: 7, sigma: 1}
	require.InDelta(t, 0.38292492*0.38292492, g.fraction(5, 7), 1e-8)
	require.Zero(t, g.fraction(50, 7))
}

// Through astropy's WCS the truth has a star and its line where the scene says,
// for two position angles, both parities and both mountings. Required: 0.1
// voxel; the seeing is wide enough for the sampling by elements to leave 0.01.
func TestCrosscheckTruthWCS(t *testing.T) {
	var args, cases []string
	for _, name := range testProfiles() {
		for _, rotang := range []float64{0, 37} {
			for _, parity := range []int{1, -1} {
				p := smallProfile(t, name)
				p.DMD.Parity = parity
				target := smallTarget(p)
				target.RotangDeg = rotang
				seq := planned(t, p, target)
				nm := p.Spectrograph.CenterNM + 3.3
				scene := &Scene{SeeingFWHMArcsec: 1, Sky: Sky{ContinuumABArcsec2: ptr(22)}, Sources: []Source{{
					Kind: KindStar, EastArcsec: 0.21, NorthArcsec: 0.5, Lines: []Line{{WavelengthNM: nm, FluxWM2: 1e-15}},
				}}}
				dir, _ := rehearsed(t, seq, scene, Options{Perfect: true, Noiseless: true})
				args = append(args, filepath.Join(dir, TruthFolder, TruthFile), "0.21", "0.5", fmt.Sprint(nm))
				cases = append(cases, fmt.Sprintf("%s, ROTANG %v, parity %d", name, rotang, parity))
			}
		}
	}
	off := numbers(t, outside.Python(t, "rehearse_truth.py", args...))
	for i, what := range cases {
		t.Logf("%s: off by %.5f, %.5f, %.5f voxels", what, off[3*i], off[3*i+1], off[3*i+2])
		for _, d := range off[3*i : 3*i+3] {
			require.InDelta(t, 0, d, 0.01, what)
		}
	}
}
