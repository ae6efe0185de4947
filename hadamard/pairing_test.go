package hadamard

import (
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

// excess is the chi-square of a pairing by way of the permuted Gram.
func excess(c *Checks, g *Gram, from []int) float64 {
	chi2, expected, _ := c.Chi2(g.Permuted(from))
	return chi2 - expected
}

// TestPairings: the fast forms are the chi-squares of permuted Grams.
func TestPairings(t *testing.T) {
	rng := rand.New(rand.NewPCG(2, 2))
	for _, c := range []*Code{mustCode(t, MSequence, 31), mustCode(t, Legendre, 23), mustCode(t, TwinPrime, 15), planarCode(t, 21)} {
		v := c.V()
		checks := mustChecks(t, c, []int{1, 4, 5, 9, 12}).WithoutPedestal()
		g := NewGram(v)
		y, s2 := randomBlock(4, v, 50), randomBlock(5, v, 50)
		g.Add(y, s2, 50, 50, 1)
		base := excess(checks, g, rng.Perm(v))
		near := func(want, got float64) { t.Helper(); require.InDelta(t, want, got, 1e-9*base) }

		perm := rng.Perm(v)
		near(excess(checks, g, perm), checks.Chi2Permuted(g, perm))
		twice := slices.Clone(perm)
		twice[3] = twice[4]
		near(excess(checks, g, twice), checks.Chi2Permuted(g, twice))
		near(excess(checks, g.Permuted(twice), perm), checks.Chi2Permuted(g.Permuted(twice), perm))
		require.Less(t, testing.AllocsPerRun(5, func() { checks.Chi2Permuted(g, perm) }), 1.0)

		frames, rows := rng.Perm(v), rng.Perm(v)
		for s, got := range checks.Rotations(g, frames, rows) {
			from := make([]int, v)
			for i := range v {
				from[rows[(i+s)%v]] = frames[i]
			}
			near(excess(checks, g, from), got)
		}

		same := make([]int, v)
		for i := range same {
			same[i] = i
		}
		start := excess(checks, g, same)
		changes := checks.Exchanges(g)
		for i := range v {
			require.Zero(t, changes.At(i, i))
			for j := range i {
				from := slices.Clone(same)
				from[i], from[j] = j, i
				near(excess(checks, g, from)-start, changes.At(i, j))
			}
		}
	}
}

// TestRotationsFindTheStart of a night whose frames are late, reversed or both.
func TestRotationsFindTheStart(t *testing.T) {
	m := newMiniature(t, mustCode(t, MSequence, 63), 16, 500, 3, fields["continuum"], 2)
	m.expose(nil)
	const v, late = 63, 5
	order := m.rng.Perm(v)
	for _, reversed := range []bool{false, true} {
		// What was exposed at time t as row order[t+late] is labelled order[t].
		shown := make([]float32, len(m.y))
		for i := range v {
			from := order[(i+late)%v]
			if reversed {
				from = order[(v-1-i+late)%v]
			}
			copy(shown[order[i]*m.pixels:(order[i]+1)*m.pixels], m.y[from*m.pixels:])
		}
		g := NewGram(v)
		g.Add(shown, m.s2, m.pixels, m.pixels, 1)
		frames := slices.Clone(order)
		if reversed {
			slices.Reverse(frames)
		}
		scores := m.checks.Rotations(g, frames, order)
		best := slices.Index(scores, slices.Min(scores))
		require.Equal(t, late, best)
		straight := m.checks.Rotations(g, order, order)
		if reversed {
			require.Greater(t, slices.Min(straight), 10*scores[best])
		}
	}
}

// TestPairingsOfLargeCodes are fast enough to search: v = 1023 takes a few seconds.
func TestPairingsOfLargeCodes(t *testing.T) {
	c := mustCode(t, MSequence, 1023)
	rng := rand.New(rand.NewPCG(2, 2))
	start := time.Now()
	lap := func(what string) { t.Helper(); t.Logf("%-12s %v", what, time.Since(start)); start = time.Now() }
	checks := mustChecks(t, c, rng.Perm(1023)[:128])
	lap("NewChecks")
	g := NewGram(1023)
	y := randomBlock(4, 1023, 256)
	g.Add(y, y, 256, 256, 1)
	lap("Gram.Add 256")
	scores := checks.Rotations(g, rng.Perm(1023), rng.Perm(1023))
	lap("Rotations")
	require.Len(t, scores, 1023)
	changes := checks.Exchanges(g)
	lap("Exchanges")
	from := make([]int, 1023)
	for i := range from {
		from[i] = i
	}
	from[3], from[900] = 900, 3
	before := checks.Chi2Permuted(g, rng.Perm(1023))
	lap("one pairing")
	straight, expected, _ := checks.Chi2(g)
	require.InDelta(t, checks.Chi2Permuted(g, from)-(straight-expected), changes.At(3, 900), 1e-8*before)
}
