package calib

import (
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

func TestGrow(t *testing.T) {
	start := func() []Flag {
		return []Flag{
			0, 0, 0, 0,
			0, Saturated, 0, BadPixel,
			0, 0, 0, 0,
			0, 0, 0, 0,
		}
	}
	flags := start()
	require.Equal(t, 3, GrowColumns(flags, 4, 2, Saturated))
	require.Equal(t, []Flag{
		0, Saturated, 0, 0,
		0, Saturated, 0, BadPixel,
		0, Saturated, 0, 0,
		0, Saturated, 0, 0,
	}, flags)
	flags = start()
	require.Equal(t, 5, GrowAround(flags, 4, 1, BadPixel))
	require.Equal(t, []Flag{
		0, 0, BadPixel, BadPixel,
		0, Saturated, BadPixel, BadPixel,
		0, 0, BadPixel, BadPixel,
		0, 0, 0, 0,
	}, flags)
	require.Zero(t, GrowAround(flags, 4, 0, BadPixel))
	require.Zero(t, GrowColumns(flags, 0, 1, BadPixel))
}

// By definition: a pixel has the flag exactly if one that had it lies within reach.
func TestGrowDefinition(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		width := rapid.IntRange(1, 7).Draw(t, "width")
		height := rapid.IntRange(1, 7).Draw(t, "height")
		reach := rapid.IntRange(0, 3).Draw(t, "reach")
		columns := rapid.Bool().Draw(t, "columns")
		flags := rapid.SliceOfN(rapid.SampledFrom([]Flag{0, 0, 0, Saturated, BadPixel}), width*height, width*height).Draw(t, "flags")
		grown := append([]Flag(nil), flags...)
		added := 0
		if columns {
			added = GrowColumns(grown, width, reach, Saturated)
		} else {
			added = GrowAround(grown, width, reach, Saturated)
		}
		for i := range flags {
			want := flags[i]
			for k, f := range flags {
				dx, dy := i%width-k%width, i/width-k/width
				near := max(dx, -dx) <= reach && max(dy, -dy) <= reach && (dx == 0 || !columns)
				if near && f&Saturated != 0 {
					want |= Saturated
				}
			}
			if want != grown[i] {
				t.Fatalf("pixel %d: %d, want %d", i, grown[i], want)
			}
			if grown[i] != flags[i] {
				added--
			}
		}
		if added != 0 {
			t.Fatalf("the count is off by %d", added)
		}
	})
}
