package instrument_test

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
)

func TestGridByHand(t *testing.T) {
	g := instrument.Grid{FirstNM: 500, StepNM: 0.5, Count: 3}
	require.True(t, g.Even())
	require.Equal(t, []float64{499.75, 500.25, 500.75, 501.25}, g.EdgesNM())
	require.Equal(t, 501.0, g.LastNM())
	require.Equal(t, 1.5, g.SpanNM())
	g.Spacing = instrument.Logarithmic
	require.False(t, g.Even())
	require.InDelta(t, 501.001000667, g.LastNM(), 2e-6) // 500 exp(1/500) by hand
	g.Spacing, g.Axis = instrument.Linear, instrument.Air
	require.Equal(t, physics.AirToVacuum(500.5), g.WavelengthNM(1))
	require.Equal(t, 500.5, g.AxisNM(1))
}

// Index inverts WavelengthNM; edges rise and tile the span; a logarithmic grid's voxels
// all have the same ratio.
func TestGridLaws(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		g := instrument.Grid{
			FirstNM: rapid.Float64Range(300, 2500).Draw(t, "first"), StepNM: rapid.Float64Range(0.01, 2).Draw(t, "step"),
			Count:   rapid.IntRange(1, 500).Draw(t, "count"),
			Axis:    rapid.SampledFrom([]instrument.Axis{instrument.Vacuum, instrument.Air}).Draw(t, "axis"),
			Spacing: rapid.SampledFrom([]instrument.Spacing{instrument.Linear, instrument.Logarithmic}).Draw(t, "spacing"),
		}
		i := rapid.Float64Range(-1, 600).Draw(t, "i")
		require.InDelta(t, i, g.Index(g.WavelengthNM(i)), 1e-7)
		edges := g.EdgesNM()
		require.Len(t, edges, g.Count+1)
		require.InDelta(t, g.SpanNM(), edges[g.Count]-edges[0], 1e-9)
		for k := range g.Count {
			require.Less(t, edges[k], edges[k+1])
		}
		if g.Spacing == instrument.Logarithmic {
			require.InEpsilon(t, g.AxisNM(1)/g.AxisNM(0), g.AxisNM(i+1)/g.AxisNM(i), 1e-12)
		}
		require.InEpsilon(t, g.StepNM, g.AxisNM(0.5)-g.AxisNM(-0.5), 1e-3)
	})
}

// The words of YAML, and what is no word.
func TestGridKeys(t *testing.T) {
	read := func(more string) (instrument.Grid, error) {
		var g struct {
			Grid instrument.Grid `yaml:"grid"`
		}
		doc, err := config.Parse("grid.yaml", []byte("grid:\n  first_nm: 500\n  step_nm: 0.5\n  count: 3\n"+more))
		require.NoError(t, err)
		err = doc.Decode(&g)
		if err == nil {
			text, failed := config.Encode(g)
			require.NoError(t, failed)
			again := g
			again.Grid = instrument.Grid{}
			doc, failed = config.Parse("again.yaml", text)
			require.NoError(t, failed)
			require.NoError(t, doc.Decode(&again))
			require.Equal(t, g, again)
			for _, word := range strings.Fields(more) {
				require.Contains(t, string(text), word)
			}
		}
		return g.Grid, err
	}
	g, err := read("")
	require.NoError(t, err)
	require.True(t, g.Even())
	g, err = read("  axis: awav\n  spacing: log\n")
	require.NoError(t, err)
	require.Equal(t, instrument.Air, g.Axis)
	require.Equal(t, instrument.Logarithmic, g.Spacing)
	_, err = read("  axis: wave\n  spacing: linear\n")
	require.NoError(t, err)
	_, err = read("  axis: air\n")
	require.ErrorContains(t, err, "use wave (vacuum) or awav (air)")
	require.ErrorContains(t, err, "grid.axis")
	_, err = read("  spacing: 3\n")
	require.Error(t, err)
}
