package reduce

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
)

// Frames that differ from the predicted light by their noise alone have no excess;
// whatever both totals are. A pattern of 1 % in the pixels shows in single pixels and
// averages down, one of 64 columns shows in cells of every size. Unknown and flagged
// pixels, however wrong, do not count. Five standard errors.
func TestCompareDepth(t *testing.T) {
	const columns, rows, first, level = 192, 64, 3, 10000.0
	for name, c := range map[string]struct {
		pixel, wave float64
	}{"flat": {}, "pixels": {pixel: 0.01}, "wave": {wave: 0.01}} {
		rng := rand.New(rand.NewPCG(5, 9))
		n := columns * (rows + first)
		on := &calib.Exposure{Columns: columns, Signal: make([]float32, n), Variance: make([]float32, n), Flags: make([]calib.Flag, n)}
		light := make([]float32, columns*rows)
		for i := range n {
			x := i % columns
			f := 1 + c.pixel*rng.NormFloat64() + math.Sqrt2*c.wave*math.Sin(2*math.Pi*float64(x)/64)
			on.Variance[i] = level
			on.Signal[i] = float32(f*level + math.Sqrt(level)*rng.NormFloat64())
			if i%97 == 0 {
				on.Signal[i], on.Flags[i] = 1e9, calib.BadPixel
			}
			if at := i - first*columns; at >= 0 && x >= 8 {
				light[at] = 7 // any scale
			}
		}
		points := compareDepth(on, light, first)
		require.Len(t, points, depthLevels)
		for _, p := range points {
			t.Logf("%s: %+v", name, p)
			side := float64(p.Side)
			wave := c.wave * math.Abs(math.Sin(math.Pi*side/64)/(side*math.Sin(math.Pi/64))) // of a cell's mean
			want := math.Hypot(c.pixel/side, wave)
			require.InDelta(t, want*want, p.RMS*p.RMS-1/(p.SN*p.SN), 5*(want*want+1/(p.SN*p.SN))*math.Sqrt(2*side*side/(columns*rows))+1e-3*want*want)
			require.InEpsilon(t, side*math.Sqrt(level), p.SN, 0.05)
		}
	}
	require.Nil(t, compareDepth(&calib.Exposure{Columns: 2, Signal: make([]float32, 4), Variance: make([]float32, 4), Flags: make([]calib.Flag, 4)}, make([]float32, 4), 0))
}
