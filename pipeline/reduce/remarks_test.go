package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"
)

// By hand: 1/3700 nominal; off by five errors and by half as much again.
func TestFarLeak(t *testing.T) {
	const nominal = 1.0 / 3700
	require.True(t, farLeak(1.0/15495, 1.0/100000, nominal), "a rehearsal without leak")
	require.True(t, farLeak(0, 1.0/50000, nominal))
	require.True(t, farLeak(1.0/1500, 1.0/50000, nominal))
	require.False(t, farLeak(1.0/15495, 1.0/5000, nominal), "not known well enough")
	require.False(t, farLeak(1.0/3000, 1e-9, nominal), "close by")
	require.False(t, farLeak(1, 0, 0), "nothing is nominal")
}
