package calib

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// lineError is the largest error over a line's peak (the light of a voxel centred
// on it) for all phases of line and voxels, the line being span px from the centre
// of a row at most.
func lineError(t testing.TB, fwhm, width float64, columns int, near func(phase float64) float64) float64 {
	r := newResampler(t, columns)
	variance := make([]float32, columns)
	peak := math.Erf(width / 2 * fwhmPerSigma / fwhm / math.Sqrt2)
	worst := 0.0
	for i := range 40 {
		centre := near(float64(i) / 40)
		row := gaussianRow(columns, centre, fwhm)
		for k := range 20 {
			start := -0.5 + float64(k)/20
			edges := evenEdges(start, width, 1+int((float64(columns)-0.5-start)/width))
			v := newVoxels(len(edges) - 1)
			r.Resample(v, row, variance, nil, edges)
			for n, got := range v.Signal {
				want := gaussianBelow(edges[n+1], centre, fwhm) - gaussianBelow(edges[n], centre, fwhm)
				worst = max(worst, math.Abs(float64(got)-want)/peak)
			}
		}
	}
	return worst
}

// The design's figure: interpolation errs by less than 0.5 % of a line's peak
// where profiles have FWHM >= 3 px. The truth is erf, in closed form.
func TestResampleLines(t *testing.T) {
	inside := func(phase float64) float64 { return 30 + phase }
	for _, c := range []struct{ fwhm, width, limit float64 }{
		{3.0, 1.0, 0.0015},
		{3.2, 1.0, 0.0010},
		{3.0, 0.5, 0.0025},
		{3.0, 1.7, 0.0010},
		{3.0, 3.0, 0.0010},
		{5.0, 1.0, 0.0005},
		{12, 1.0, 0.0002},
	} {
		worst := lineError(t, c.fwhm, c.width, 64, inside)
		t.Logf("FWHM %.1f px, voxels of %.1f px: worst error %.4f %% of the peak", c.fwhm, c.width, 100*worst)
		require.Less(t, worst, c.limit)
	}
}

// Lines at the ends of the row, part of them beyond: one-sided stencils.
func TestResampleLinesAtTheEnds(t *testing.T) {
	for _, c := range []struct {
		name  string
		near  func(phase float64) float64
		limit float64
	}{
		{"centre -1..0", func(p float64) float64 { return p - 1 }, 0.01},
		{"centre 0..1", func(p float64) float64 { return p }, 0.01},
		{"centre 2..3", func(p float64) float64 { return 2 + p }, 0.007},
		{"centre 4..5", func(p float64) float64 { return 4 + p }, 0.005},
		{"centre 62..63", func(p float64) float64 { return 62 + p }, 0.01},
	} {
		worst := lineError(t, 3, 1, 64, c.near)
		t.Logf("%s: worst error %.4f %% of the peak", c.name, 100*worst)
		require.Less(t, worst, c.limit)
	}
}

// What Lagrange's weights on the same points, and plain overlap, would do: the
// reasons for this interpolant. The design says overlap errs by 7 to 10 %.
func TestResampleBeatsTheSimplerWays(t *testing.T) {
	const fwhm, columns = 3.0, 64
	worst := map[string]float64{}
	peak := math.Erf(0.5 * fwhmPerSigma / fwhm / math.Sqrt2)
	for i := range 40 {
		centre := 30 + float64(i)/40
		row := gaussianRow(columns, centre, fwhm)
		sum := make([]float64, columns+1)
		for x, v := range row {
			sum[x+1] = sum[x] + float64(v)
		}
		for k := range 20 {
			f := float64(k) / 20
			overlap := func(m int) float64 { return sum[m] + f*(sum[m+1]-sum[m]) }
			eight := func(m int) float64 {
				out := 0.0
				for n, l := range lagrange(middle + f) {
					out += l * sum[m-middle+n]
				}
				return out
			}
			for m := 15; m < 45; m++ {
				want := gaussianBelow(float64(m)+f+0.5, centre, fwhm) - gaussianBelow(float64(m)+f-0.5, centre, fwhm)
				worst["overlap"] = max(worst["overlap"], math.Abs(overlap(m+1)-overlap(m)-want)/peak)
				worst["lagrange"] = max(worst["lagrange"], math.Abs(eight(m+1)-eight(m)-want)/peak)
			}
		}
	}
	t.Logf("FWHM 3 px, voxels of 1 px: overlap %.2f %%, 8-point Lagrange %.4f %% of the peak", 100*worst["overlap"], 100*worst["lagrange"])
	require.InDelta(t, 0.07, worst["overlap"], 0.01)
	require.Greater(t, worst["lagrange"], 2.5*lineError(t, fwhm, 1, columns, func(p float64) float64 { return 30 + p }))
}
