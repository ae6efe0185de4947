package product

import (
	"testing"

	"github.com/stretchr/testify/require"
)

// Worked by hand; the shares beyond 1, 2 and 3 standard deviations are in every table of the
// Gaussian (0.3173, 0.0455, 0.0027).
func TestDarkPulls(t *testing.T) {
	d := &DarkPulls{FirstSigma: -3, StepSigma: 1, Counts: []int{3, 20, 477, 473, 25, 2}}
	require.Equal(t, 1000, d.Number())
	sum := 0.0
	for i := range d.Counts {
		sum += d.Expected(i)
	}
	require.InDelta(t, 1000, sum, 1e-9)
	require.InDelta(t, 22.75, d.Expected(0), 0.01) // all below -2
	require.InDelta(t, 341.3, d.Expected(2), 0.1)
	for sigmas, want := range map[float64][2]float64{1: {0.05, 0.3173}, 2: {0.005, 0.0455}} {
		part, expected := d.Beyond(sigmas)
		require.InDelta(t, want[0], part, 1e-12)
		require.InDelta(t, want[1], expected, 1e-4)
	}
	part, _ := (&DarkPulls{}).Beyond(2)
	require.Zero(t, part)
}

func TestFlagShare(t *testing.T) {
	q := Quality{Flags: []FlagCount{{Name: "LOST", Bit: FlagLost, Voxels: 3, Share: 0.25}}}
	require.Equal(t, 0.25, q.FlagShare(FlagLost))
	require.Zero(t, q.FlagShare(FlagSaturated))
	require.Zero(t, Quality{}.FlagShare(FlagLost))
}
