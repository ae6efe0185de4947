package calib

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// plain has round numbers for working by hand.
func plain() Geometry {
	return Geometry{X_c: 100, Y_c: 50, X_e: 2, J_c: 10, L_c: 600, D: [3]float64{4, 0.01, -0.001},
		SlitTilt: 0.1, Smile: 0.001, TraceTilt: 0.01, TraceCurve: 1e-5}
}

// The first rows need no coupling (x = X_c, or no tilt); the last was solved by
// hand with Picard's iteration to the digits given.
func TestGeometryByHand(t *testing.T) {
	g := plain()
	require.Equal(t, 0.0, g.TraceShift(100))
	require.InDelta(t, 1.1, g.TraceShift(200), 1e-12) // 0.01*100 + 1e-5*1e4
	require.InDelta(t, -0.9, g.TraceShift(0), 1e-12)  // -1 + 0.1
	// On the reference row at the reference wavelength: x = X_c exactly.
	require.InDelta(t, 100, g.X(10, 50, 600), 1e-9)
	flat := g
	flat.SlitTilt, flat.Smile = 0, 0
	// 100 + 2*(13-10) + 4*10 + 0.01*100 - 0.001*1000 = 146
	require.InDelta(t, 146, flat.X(13, 77, 610), 1e-9)
	untraced := g
	untraced.TraceTilt, untraced.TraceCurve = 0, 0
	// q = 20: 146 + 0.1*20 + 0.001*400 = 148.4
	require.InDelta(t, 148.4, untraced.X(13, 70, 610), 1e-9)
	require.InDelta(t, 610, untraced.Wavelength(148.4, 13, 70), 1e-9)
	// Coupled. t(148.4) = 0.484 + 0.0234256 = 0.5074256, q = 20.5074256,
	// x = 146 + 2.05074256 + 0.42055450 = 148.47129706;
	// t = 0.4847129706 + 0.0234946664 = 0.5082076370, q = 20.5082076370,
	// x = 146 + 2.0508207637 + 0.4205865805 = 148.4714073442;
	// t = 0.4847140734 + 0.0234947733 = 0.5082088467, q = 20.5082088467,
	// x = 146 + 2.0508208847 + 0.4205866301 = 148.4714075148.
	require.InDelta(t, 148.4714075, g.X(13, 70, 610), 1e-7)
}

// solves both equations of the model, separately.
func requireSolved(t require.TestingT, g Geometry, x, j, y0, wavelength float64) {
	y := y0 + g.TraceTilt*(x-g.X_c) + g.TraceCurve*math.Pow(x-g.X_c, 2)
	l, q := wavelength-g.L_c, y-g.Y_c
	want := g.X_c + g.X_e*(j-g.J_c) + g.D[0]*l + g.D[1]*l*l + g.D[2]*l*l*l + g.SlitTilt*q + g.Smile*q*q
	require.InDelta(t, want, x, 1e-9)
}

func drawGeometry(t *rapid.T) Geometry {
	sign := 1.0
	if rapid.Bool().Draw(t, "reversed") {
		sign = -1
	}
	return Geometry{
		X_c: rapid.Float64Range(200, 500).Draw(t, "x_c"), Y_c: rapid.Float64Range(50, 150).Draw(t, "y_c"),
		X_e: sign * rapid.Float64Range(1, 4).Draw(t, "x_e"), J_c: 55, L_c: 650,
		D: [3]float64{sign * rapid.Float64Range(1, 5).Draw(t, "d1"),
			rapid.Float64Range(-1e-3, 1e-3).Draw(t, "d2"), rapid.Float64Range(-3e-6, 3e-6).Draw(t, "d3")},
		SlitTilt: rapid.Float64Range(-0.05, 0.05).Draw(t, "tilt"), Smile: rapid.Float64Range(-1e-4, 1e-4).Draw(t, "smile"),
		TraceTilt: rapid.Float64Range(-0.012, 0.012).Draw(t, "trace tilt"), TraceCurve: rapid.Float64Range(-1e-5, 1e-5).Draw(t, "curve"),
	}
}

func TestGeometryRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		g := drawGeometry(t)
		require.NoError(t, g.Check(640, 192, 560, 740))
		j := rapid.Float64Range(0, 110).Draw(t, "j")
		y0 := rapid.Float64Range(0, 191).Draw(t, "y0")
		wavelength := rapid.Float64Range(560, 740).Draw(t, "L")
		x := g.X(j, y0, wavelength)
		requireSolved(t, g, x, j, y0, wavelength)
		require.InDelta(t, wavelength, g.Wavelength(x, j, y0), 1e-9)
		edges := g.EdgesX(make([]float64, 60), j, y0, 560, 3)
		var uneven []float64
		for i := range edges {
			uneven = append(uneven, 560*math.Exp(float64(i)/200))
		}
		for i, x := range g.EdgesXAt(make([]float64, 60), j, y0, uneven) {
			require.InDelta(t, g.X(j, y0, uneven[i]), x, 1e-8)
		}
		for i, e := range edges {
			requireSolved(t, g, e, j, y0, 560+3*float64(i))
			if i > 0 {
				require.Positive(t, (e-edges[i-1])*g.D[0], "edges run one way")
			}
		}
	})
}

func TestGeometryBeyondTheBranch(t *testing.T) {
	g := Geometry{L_c: 500, D: [3]float64{1, -0.005, 0}} // turns at l = 100, x = 50
	require.InDelta(t, 590, g.Wavelength(g.X(0, 0, 590), 0, 0), 1e-9)
	require.InDelta(t, 500-200, g.Wavelength(-400, 0, 0), 1e-9) // -200 - 0.005*4e4
	require.True(t, math.IsNaN(g.Wavelength(50.1, 0, 0)))
	require.True(t, math.IsNaN(g.Wavelength(math.NaN(), 0, 0)))
	require.True(t, math.IsNaN(g.Wavelength(math.Inf(1), 0, 0)))
	require.NoError(t, g.Check(100, 100, 400, 599))
	require.ErrorContains(t, g.Check(100, 100, 400, 601), "monotonic from -Inf to 600 nm")
	// A curvature so small that its square is 0 in float64.
	g.D = [3]float64{1, 1.1e-162, 0}
	require.InDelta(t, 560, g.Wavelength(60, 0, 0), 1e-9)
	require.NoError(t, g.Check(100, 100, 400, 700))
	// A cubic that turns on both sides, at l = -10 and 10.
	g.D = [3]float64{3, 0, -0.01}
	require.NoError(t, g.Check(100, 100, 490.1, 509.9))
	require.ErrorContains(t, g.Check(100, 100, 489, 509), "monotonic from 490 to 510 nm")
	require.InDelta(t, 509, g.Wavelength(g.X(0, 0, 509), 0, 0), 1e-9)
	require.True(t, math.IsNaN(g.Wavelength(20.5, 0, 0))) // the crest is at 20
}

func TestGeometryCheckRefuses(t *testing.T) {
	for _, c := range []struct {
		spoil func(*Geometry)
		want  string
	}{
		{func(g *Geometry) { g.D[0] = 0 }, "d1 is 0"},
		{func(g *Geometry) { g.Smile = math.NaN() }, "not a finite number"},
		{func(g *Geometry) { g.TraceTilt, g.SlitTilt = 0.5, 0.5 }, "slit_tilt"},
	} {
		g := plain()
		c.spoil(&g)
		require.ErrorContains(t, g.Check(200, 100, 590, 610), c.want)
	}
}

// A night's worth in miniature: lines of FWHM 3 px from a forward mapping written
// here, on traces that bend; straightened and resampled against closed forms. Both
// interpolations together stay below the design's 0.5 % of the peak.
func TestGeometryShiftAndResample(t *testing.T) {
	const columns, rows, fwhm = 160, 48, 3.0
	g := Geometry{X_c: 80, Y_c: 24, X_e: 2, J_c: 5, L_c: 600, D: [3]float64{1, 2e-4, 0},
		SlitTilt: 0.02, Smile: 2e-4, TraceTilt: 0.02, TraceCurve: 5e-5}
	worst := 0.0
	for _, c := range []struct{ j, row, wavelength float64 }{
		{3, 21.3, 585.4}, {5, 24, 600}, {8, 26.77, 629.1}, {6, 17.5, 640.25},
	} {
		// Where the line's centre falls: Picard on the model's two equations.
		x, y := g.X_c, c.row
		for range 100 {
			q := y - g.Y_c
			l := c.wavelength - g.L_c
			x = g.X_c + g.X_e*(c.j-g.J_c) + g.D[0]*l + g.D[1]*l*l + g.SlitTilt*q + g.Smile*q*q
			y = c.row + g.TraceTilt*(x-g.X_c) + g.TraceCurve*(x-g.X_c)*(x-g.X_c)
		}
		worst = max(worst, reduceLine(t, g, columns, rows, fwhm, x, y, c.j))
	}
	t.Logf("star line of FWHM 3 px: worst error %.4f %% of the peak", 100*worst)
	require.Less(t, worst, 0.005)
}

// reduceLine puts a circular Gaussian at (x, y), takes it to voxels of 1 nm for
// element j, and returns the worst error over the largest voxel. The truth is the
// Gaussian over [edges along x] times [trace row], the trace taken as straight
// across the 1 px of a voxel; that is good to 0.05 % here (tilt 0.02 of 1 px).
func reduceLine(t *testing.T, g Geometry, columns, rows int, fwhm, x, y, j float64) float64 {
	data := block(rows, columns, func(px, py int) float64 {
		return (gaussianBelow(float64(px)+0.5, x, fwhm) - gaussianBelow(float64(px)-0.5, x, fwhm)) *
			(gaussianBelow(float64(py)+0.5, y, fwhm) - gaussianBelow(float64(py)-0.5, y, fwhm))
	})
	shift := make([]float64, columns)
	for px := range shift {
		shift[px] = g.TraceShift(float64(px))
	}
	s, r := newShift(t, rows, shift...), newResampler(t, columns)
	row, zero := make([]float32, columns), make([]float32, columns)
	edges := make([]float64, 101)
	v := newVoxels(100)
	peak := math.Pow(math.Erf(0.5*fwhmPerSigma/fwhm/math.Sqrt2), 2)
	worst := 0.0
	for y0 := range rows {
		s.Signal(row, data, 0, y0)
		g.EdgesX(edges, j, float64(y0), 555.37, 1)
		r.Resample(v, row, zero, nil, edges)
		for i, got := range v.Signal {
			if v.Flags[i] != 0 {
				continue
			}
			worst = max(worst, math.Abs(float64(got)-voxelTruth(g, edges[i], edges[i+1], float64(y0), x, y, fwhm))/peak)
		}
	}
	return worst
}

// voxelTruth integrates the Gaussian over a voxel bounded by curved trace rows: by
// 64 strips along x, exact along y.
func voxelTruth(g Geometry, x0, x1, y0, x, y, fwhm float64) float64 {
	const strips = 64
	sum := 0.0
	for i := range strips {
		a := x0 + (x1-x0)*float64(i)/strips
		b := x0 + (x1-x0)*float64(i+1)/strips
		centre := y0 + g.TraceShift((a+b)/2)
		sum += (gaussianBelow(b, x, fwhm) - gaussianBelow(a, x, fwhm)) *
			(gaussianBelow(centre+0.5, y, fwhm) - gaussianBelow(centre-0.5, y, fwhm))
	}
	return sum
}

func BenchmarkEdgesX(b *testing.B) {
	g := Geometry{X_c: 320, Y_c: 96, X_e: 2, J_c: 55, L_c: 650, D: [3]float64{4, 1e-3, 1e-6},
		SlitTilt: 0.01, Smile: 1e-5, TraceTilt: 0.005, TraceCurve: 2e-6}
	dst := make([]float64, 401)
	b.SetBytes(int64(8 * len(dst)))
	for b.Loop() {
		g.EdgesX(dst, 30, 100, 600, 0.25)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/400, "ns/edge")
}
