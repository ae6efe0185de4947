package report

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

// Frames lie at the middle of their exposures, lanes follow the night, and frames that were
// not used are marked and counted.
func TestTimeline(t *testing.T) {
	in := smallScene().input(smallScene().schema(t))
	l := newTimeline(in.Ledger)
	require.Equal(t, "2031-03-14", l.date)
	require.Len(t, l.lanes, 3)
	require.Equal(t, "bias", l.lanes[0].name)
	require.Equal(t, "science", l.lanes[1].name)
	require.Equal(t, "of no step", l.lanes[2].name)
	require.Len(t, l.lanes[1].frames, 15)
	require.Equal(t, 1, l.lanes[1].missing)
	require.InDelta(t, 2+3.0/60+45.0/3600, l.zero, 1e-9) // 02:03 and half of 90 s
	require.InDelta(t, 2, l.first, 1e-9)
	require.InDelta(t, 2+19.0/60+90.0/3600, l.last, 1e-9)

	text := string(drawTimeline(in.Ledger, in.Throughput))
	require.Contains(t, text, "1 missing")
	require.Equal(t, 1, strings.Count(text, "crossmark")) // the frame of no step
	require.Equal(t, 4, strings.Count(text, `class="error"`))
	require.Empty(t, drawTimeline(product.Ledger{product.NewEntry(1)}, nil))

	// Without curves, the ledger's own throughput is drawn.
	in.Ledger[4].Throughput, in.Ledger[4].ThroughputErr = 0.98, 0.01
	require.Equal(t, 1, strings.Count(string(drawTimeline(in.Ledger, nil)), `class="error"`))
}
