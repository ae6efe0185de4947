package report

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestPercent(t *testing.T) {
	for x, want := range map[float64]string{
		0: "0 %", 1: "100 %", 0.5: "50.00 %", 0.99973: "99.97 %", 0.99996: "> 99.99 %", 0.00004: "< 0.01 %", 0.0001: "0.01 %",
	} {
		require.Equal(t, want, percent(x))
	}
	require.Equal(t, "–", percent(math.NaN()))
}

func TestFigure(t *testing.T) {
	for x, want := range map[float64]string{
		0: "0", 1: "1", -25: "-25", 0.1: "0.1", 12.3456: "12.35", 999.96: "1000", 2705.6: "2706", 123456.7: "123457", 1e7: "1.00e+07",
		0.012345: "0.0123", 0.0001: "1.00e-04", -0.25: "-0.25",
	} {
		require.Equal(t, want, figure(x))
	}
	require.Equal(t, "–", figure(math.NaN()))
}

func TestBytesText(t *testing.T) {
	for n, want := range map[int64]string{
		0: "0 B", 999: "999 B", 1000: "1.00 kB", 12345: "12.3 kB", 999499: "999 kB", 999500: "1.00 MB", 8.6e9: "8.60 GB", math.MaxInt64: "9.22 EB",
	} {
		require.Equal(t, want, bytesText(n))
	}
}

func TestRate(t *testing.T) {
	require.Equal(t, "6.5 GB/s", rate(13e9, 2))
	require.Equal(t, "0.00416 GB/s", rate(9031680, 2.17))
	require.Empty(t, rate(0, 2))
	require.Empty(t, rate(1, 0))
}

// A large cube is looked at in evenly spaced planes, no more than fit the bound,
// and at least in one.
func TestStride(t *testing.T) {
	for _, c := range []struct{ voxels, planes, want int }{
		{111 * 192, 400, 1}, {1007 * 2048, 2048, 24}, {1 << 40, 3, 3}, {1, 1, 1},
	} {
		got := strideFor(c.voxels, c.planes)
		require.Equal(t, c.want, got)
		looked := 0
		for l := got / 2; l < c.planes; l += got {
			looked++
		}
		require.Positive(t, looked)
		require.True(t, looked == 1 || looked*c.voxels*bytesPerVoxel <= scanBytes+c.voxels*bytesPerVoxel)
	}
}
