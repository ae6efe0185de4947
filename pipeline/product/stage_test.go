package product

import (
	"testing"

	"github.com/stretchr/testify/require"
)

// Worked by hand.
func TestStage(t *testing.T) {
	s := NewStage("strips", 10, 25e9, 3, 6, 8, 2)
	require.Equal(t, Stage{Name: "strips", Seconds: 10, Bytes: 25e9, GBPerS: 2.5, ReadingS: 3, ComputingS: 4, WritingS: 6, WaitingS: 6,
		Bottleneck: DiskWrite, Times: 1.5}, s)
	require.Equal(t, "disk write, 1.5 times", s.BottleneckWords())

	s = NewStage("prepare", 2, 0, 1.8, 0.2, 1.2, 2)
	require.Equal(t, DiskRead, s.Bottleneck)
	require.InDelta(t, 3, s.Times, 1e-12)
	require.InDelta(t, 1.4, s.WaitingS, 1e-12)

	s = NewStage("calibrate", 2, 0, 0.01, 0, 4.2, 2)
	require.Equal(t, "processor, over 99 times", s.BottleneckWords())
	require.Zero(t, s.WaitingS, "clocks that differ give no negative time")

	s = NewStage("sky", 1, 0, 0, 0, 1, 1)
	require.Equal(t, "processor", s.BottleneckWords())
	require.Empty(t, NewStage("nothing", 0, 0, 0, 0, 0, 1).BottleneckWords())
	require.Empty(t, Stage{Name: "of an older run", Seconds: 3}.BottleneckWords())
}
