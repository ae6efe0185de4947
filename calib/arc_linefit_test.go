package calib

import (
	"encoding/json"
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

func jsonText(t *testing.T, v any) string {
	text, err := json.Marshal(v)
	require.NoError(t, err)
	return string(text)
}

// Three lines side by side, against scipy.optimize.curve_fit on the same samples.
func TestCrosscheckLineFit(t *testing.T) {
	s := flatScene(11)
	e := s.expose(s.light(0, []sceneLine{{50.2, 3000}, {55.1, 9000}, {60.9, 1500}}))
	f := wholeRule.newLineFit(sumBlock(&e, 10, 17), []float64{50, 55, 61})
	variance := make([]float64, len(f.x))
	for i, w := range f.weight {
		variance[i] = 1 / w
	}
	require.True(t, f.solve())
	var want struct {
		P   []float64
		Cov [][]float64
	}
	out := outside.Python(t, "calib_arcs.py", "lines", jsonText(t, f.x), jsonText(t, f.value), jsonText(t, variance), jsonText(t, f.start))
	require.NoError(t, json.Unmarshal([]byte(out), &want))
	for i, p := range want.P {
		err := math.Sqrt(want.Cov[i][i])
		require.InDelta(t, p, f.p[i], 1e-3*err, "parameter %d", i)
		require.InDelta(t, err, math.Sqrt(f.inverse.At(i, i)), 1e-3*err, "error of parameter %d", i)
	}
}

// The fit stays finite and refuses politely where there is nothing to fit.
func TestLineFitOfNothing(t *testing.T) {
	s := &blockSpectrum{signal: make([]float64, 40), variance: make([]float64, 40)}
	require.False(t, wholeRule.newLineFit(s, []float64{20}).solve()) // no sample has a value
	for i := range s.variance {
		s.variance[i] = 1
	}
	require.Empty(t, wholeRule.fitGroup(s, []float64{20, 23}))
}
