package physics

import (
	"testing"

	"github.com/stretchr/testify/require"
)

// n = 1023 elements of light 1 at a contrast of 2000 (computed with numpy 1.24.2; 2000 as what
// programmable slit masks are asked for: common practice, no source).
func TestLeakFigures(t *testing.T) {
	const n, contrast = 1023, 2000
	require.InDelta(t, 0.9995+0.5115, LeakDecoded(1, n, contrast, 1), 1e-12)
	require.InDelta(t, 1.00049902, LeakDecoded(1, n, contrast, (n+1)/2), 1e-8)
	require.InDelta(t, 2./(n+1)/contrast, LeakPedestal(contrast, (n+1)/2), 1e-18)
	require.InDelta(t, 0.511, LeakOfClosed(n-1, contrast), 1e-12)
}

// Against numpy's inverse of cyclic designs whose closed elements leak.
func TestCrosscheckLeak(t *testing.T) {
	cases := mirrorAnswersOf(t).Leak
	require.Len(t, cases, 3)
	for _, c := range cases {
		all := 0.0
		for _, x := range c.Light {
			all += x
		}
		for j, x := range c.Light {
			require.InDelta(t, c.Decoded[j], LeakDecoded(x, all, c.Contrast, c.K), 1e-12)
		}
	}
}
