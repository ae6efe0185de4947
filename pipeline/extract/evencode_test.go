package extract

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// requireSameChannels holds the covariances of channels that are asked for alone, which
// may take the short way, against those that come with sums.
func requireSameChannels(t *testing.T, c *Cube, a *aperture, want *covariances) {
	t.Helper()
	got, err := c.propagate(t.Context(), a, nil)
	require.NoError(t, err)
	for l, row := range want.channels {
		for lag, v := range row {
			scale := math.Sqrt(row[0])
			if l+lag < len(want.channels) {
				scale *= math.Sqrt(want.channels[l+lag][0])
			}
			require.InDelta(t, v, got.channels[l][lag], 2e-6*scale, "channel %d lag %d", l, lag)
		}
	}
}

// The short way is taken where it may be, and gives what the samples give, with errors of
// the throughput and without. So do both ways of adding up those errors.
func TestShortWayOfAnEvenCode(t *testing.T) {
	c := tinyRun(t, "m-sequence", 31, 8)
	a := listed(t, c, "3-17", "5-9")
	a.plain()
	none := [][]float64{make([]float64, c.Grid.Count)}
	for _, e := range []float64{0, 0.02} {
		for k := range c.noise.ThroughputErr {
			c.noise.ThroughputErr[k] = e * float64(1+k%3)
		}
		p := c.newPropagator(a)
		p.chooseEven()
		require.True(t, p.even)
		require.Equal(t, e == 0, p.of != nil)
		want, err := c.propagate(t.Context(), a, none)
		require.NoError(t, err)
		requireSameChannels(t, c, a, want)
	}
	// By a step's weight that is not the others', it is not.
	c.weight[3] *= 2
	p := c.newPropagator(a)
	p.chooseEven()
	require.False(t, p.even)
}

// Moments add up what every step by itself does.
func TestMomentsAreTheStepsSum(t *testing.T) {
	for _, code := range codes {
		t.Run(code.family, func(t *testing.T) {
			c := tinyRun(t, code.family, code.v, code.dark)
			for k := range c.noise.ThroughputErr {
				c.noise.ThroughputErr[k] = 0.01 * float64(1+k%4)
			}
			a := listed(t, c, "9-14", "7-8")
			a.plain()
			sums := func(moments bool) [][]float64 {
				p := c.newPropagator(a)
				p.sums = [][]float64{make([]float64, c.Grid.Count)}
				require.True(t, p.byMoments())
				if !moments {
					p.stepwise = true
				}
				require.NoError(t, p.walk(t.Context()))
				out := table[float64](c.noise.V, c.Grid.Count)
				for _, w := range p.parts {
					require.Equal(t, moments, w.moments != nil)
					p.moves(out, w)
				}
				return out
			}
			want, got := sums(false), sums(true)
			largest := 0.0
			for k := range want {
				for _, v := range want[k] {
					largest = max(largest, math.Abs(v))
				}
			}
			require.Positive(t, largest)
			for k := range want {
				for l, v := range want[k] {
					require.InDelta(t, v, got[k][l], 3e-6*largest, "step %d channel %d", k, l)
				}
			}
		})
	}
}
