package rehearse

import (
	"context"
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// Over the science frames of a night of 127, sizes are as asked for: rms within
// 5 standard errors, means exact.
func TestFaultSizes(t *testing.T) {
	profile, err := instrument.Load("optical")
	require.NoError(t, err)
	target, err := sequence.LoadTarget("demo")
	require.NoError(t, err)
	seq, _, err := plan.Build(context.Background(), target, profile)
	require.NoError(t, err)
	fates := newFates(seq, 1, []Fault{{Drift, 0.05}, {Colour, 0.1}, {SkyLines, 0.2}, {Offset, 7}, {Seeing, 0.1}, {Guide, 0.2}, {Shift, 0.3}})
	science := seq.StepsOf(sequence.Science)
	for name, c := range map[string]struct {
		size float64
		mean float64 // NaN where it is left free
		of   func(f *fate) float64
	}{
		Drift:        {0.05, 1, func(f *fate) float64 { return f.throughput }},
		Colour:       {0.1, 0, func(f *fate) float64 { return f.colour }},
		SkyLines:     {0.2, 1, func(f *fate) float64 { return f.skyLines }},
		Offset:       {7, math.NaN(), func(f *fate) float64 { return f.offsetE }},
		Seeing:       {0.1, math.NaN(), func(f *fate) float64 { return f.seeing }},
		Guide + " u": {0.2, math.NaN(), func(f *fate) float64 { return f.guideU }},
		Guide + " w": {0.2, math.NaN(), func(f *fate) float64 { return f.guideW }},
		Shift + " x": {0.3, 0, func(f *fate) float64 { return f.shiftX }},
		Shift + " y": {0.3, 0, func(f *fate) float64 { return f.shiftY }},
	} {
		mean, square, n := 0.0, 0.0, float64(len(science))
		for _, k := range science {
			mean += c.of(&fates[k]) / n
		}
		for _, k := range science {
			square += math.Pow(c.of(&fates[k])-mean, 2) / (n - 1)
		}
		require.InDelta(t, c.size, math.Sqrt(square), 5*c.size/math.Sqrt(2*n), name)
		if !math.IsNaN(c.mean) {
			require.InDelta(t, c.mean, mean, 1e-12, name)
		}
	}
	trend := newFates(seq, 1, []Fault{{Trend, 0.3}})
	first, last := trend[seq.StepsOf(sequence.AllOff)[0]], trend[len(trend)-1]
	require.InDelta(t, 0.3, last.throughput-first.throughput, 0.003)
	for _, k := range science {
		require.Equal(t, 0.0, trend[k].colour)
	}
}
