package hadamard

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// strike is a law of charges, electrons.
type strike func(r *rand.Rand) float64

func logNormal(r *rand.Rand) float64 { return 1500 * math.Exp(0.8*r.NormFloat64()) }

// powerLaw is E^-1.5 from 20 e on.
func powerLaw(r *rand.Rand) float64 { return 20 / math.Pow(1-r.Float64(), 2) }

type pursuitCount struct {
	samples, strong, found, flagged, wrong int
}

// pursue simulates pixels of noise s with struck samples and counts what becomes of
// those above eight standard errors, and which samples are repaired though not struck.
func pursue(t testing.TB, family Family, v, g int, share float64, law strike, pixels int, seed uint64) pursuitCount {
	t.Helper()
	code, err := New(family, v)
	require.NoError(t, err)
	dark, err := ChooseDark(context.Background(), code, g, 1)
	require.NoError(t, err)
	checks, err := NewChecks(code, dark.Columns)
	require.NoError(t, err)
	p := NewPursuit(checks, DefaultPursuitRule(checks.G()))
	w, basis := p.NewWork(), checks.Basis()
	random := rand.New(rand.NewPCG(seed, 5))
	const s = 10.0
	sigma := s / p.norm[0]
	y, u := make([]float64, v), make([]float64, checks.G())
	var c pursuitCount
	for range pixels {
		struck := map[int]float64{}
		var light float64
		for k := range y {
			y[k] = s * random.NormFloat64()
			if random.Float64() < share {
				q := law(random)
				struck[k] = q
				y[k] += q
				light += q / float64(v)
			}
		}
		for i := range u {
			u[i] = dot(basis.RawRowView(i), y)
		}
		p.Find(w, u, s*s+light, 1/float64(v), nil)
		c.samples += v
		found := map[int]bool{}
		for _, h := range w.Hits {
			found[h.Row] = true
			if _, ok := struck[h.Row]; !ok && !w.Ambiguous {
				c.wrong++
			}
		}
		for k, q := range struck {
			if q < 8*sigma {
				continue
			}
			c.strong++
			switch {
			case w.Ambiguous || w.Left > 1+5*math.Sqrt(2/float64(checks.G())):
				c.flagged++
			case found[k]:
				c.found++
			}
		}
	}
	return c
}

// Of charges above eight standard errors 99 % are repaired or flagged, and fewer than
// 3 of a million samples are repaired that were not struck. Each case has 2.5 or 5
// million samples; internal/validate counts more, on whole nights.
func TestPursuitOfRandomHits(t *testing.T) {
	for name, x := range map[string]struct {
		family Family
		v, g   int
		share  float64
		law    strike
	}{
		"rare":              {MSequence, 127, 16, 2e-4, logNormal},
		"frequent":          {MSequence, 127, 32, 5e-3, logNormal},
		"frequent, longer":  {MSequence, 255, 32, 5e-3, logNormal},
		"faint":             {MSequence, 255, 16, 2e-4, powerLaw},
		"no transform":      {Legendre, 127, 16, 2e-4, powerLaw},
		"faint, twin prime": {TwinPrime, 143, 24, 1e-3, powerLaw},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			c := pursue(t, x.family, x.v, x.g, x.share, x.law, 20000, 1)
			t.Logf("%d strong hits: %d repaired, %d flagged; %d of %d samples repaired without need", c.strong, c.found, c.flagged, c.wrong, c.samples)
			require.GreaterOrEqual(t, float64(c.found+c.flagged), 0.99*float64(c.strong))
			require.GreaterOrEqual(t, float64(c.found), 0.97*float64(c.strong))
			require.Less(t, float64(c.wrong), 3e-6*float64(c.samples))
		})
	}
}

// onePursuit is a pursuit of an m-sequence of 127 with 16 dark columns.
func onePursuit(t testing.TB) (*Checks, *Pursuit) {
	code, err := New(MSequence, 127)
	require.NoError(t, err)
	dark, err := ChooseDark(context.Background(), code, 16, 1)
	require.NoError(t, err)
	checks, err := NewChecks(code, dark.Columns)
	require.NoError(t, err)
	return checks, NewPursuit(checks, DefaultPursuitRule(checks.G()))
}

// Charges of two rows that leave similar marks are unbiased and scatter as stated.
func TestPursuitCharges(t *testing.T) {
	checks, p := onePursuit(t)
	first, second := 10, -1
	for k := range p.v { // the most similar
		if k != first && (second < 0 || math.Abs(dot(p.atom(k), p.atom(first))) > math.Abs(dot(p.atom(second), p.atom(first)))) {
			second = k
		}
	}
	require.Greater(t, math.Abs(dot(p.atom(first), p.atom(second))), 0.4)
	w, basis, random := p.NewWork(), checks.Basis(), rand.New(rand.NewPCG(3, 3))
	const n, s = 20000, 7.0
	truth := map[int]float64{first: 800, second: 500}
	var bias [2]float64
	var scatter, stated [4]float64
	y, u := make([]float64, p.v), make([]float64, p.g)
	for range n {
		for k := range y {
			y[k] = s*random.NormFloat64() + truth[k]
		}
		for i := range u {
			u[i] = dot(basis.RawRowView(i), y)
		}
		p.Find(w, u, s*s, 0, nil)
		require.Len(t, w.Hits, 2)
		require.False(t, w.Ambiguous)
		var miss [2]float64
		for i, h := range w.Hits {
			miss[i] = h.Charge - truth[h.Row]
			bias[i] += miss[i] / n
		}
		for i := range scatter {
			scatter[i] += miss[i/2] * miss[i%2] / n
			stated[i] = w.Covariance[i]
		}
	}
	size := math.Sqrt(stated[0])
	for i, b := range bias {
		require.Less(t, math.Abs(b), 5*size/math.Sqrt(n), "hit %d", i)
	}
	for i := range scatter { // 5 standard errors of a variance of 20000 samples are 5 %
		require.InDelta(t, stated[i], scatter[i], 0.05*stated[0], "element %d", i)
	}
}

// A faint hit is believed where a neighbour was struck in the same row, and only there.
func TestPursuitHint(t *testing.T) {
	checks, p := onePursuit(t)
	w := p.NewWork()
	u := make([]float64, p.g)
	const row = 77
	for i, a := range p.atom(row) {
		u[i] = 4.6 * a // standard errors
	}
	p.Find(w, u, 1, 0, nil)
	require.Empty(t, w.Hits)
	require.InDelta(t, 4.6*4.6/float64(checks.G()), w.Left, 1e-9)
	p.Find(w, u, 1, 0, func(k int) bool { return k == row })
	require.Len(t, w.Hits, 1)
	require.Equal(t, row, w.Hits[0].Row)
	require.True(t, w.Hits[0].Hinted)
	require.InDelta(t, 4.6, w.Hits[0].Significance, 1e-9)
	require.InDelta(t, 4.6/p.norm[row], w.Hits[0].Charge, 1e-9)
	p.Find(w, u, 1, 0, func(k int) bool { return k == row+1 })
	require.Empty(t, w.Hits)
}

// Two rows that explain the checks alike make the pixel ambiguous; more struck samples
// than can be told leave much unexplained.
func TestPursuitDoubt(t *testing.T) {
	_, p := onePursuit(t)
	w := p.NewWork()
	u := make([]float64, p.g)
	for i := range u { // halfway between two marks
		u[i] = 10 * (p.atom(5)[i] + p.atom(40)[i])
	}
	for k := range p.v { // a charge of row 5 or 40 alone cannot be told from the other
		if k != 5 && k != 40 {
			p.norm[k] = 0
		}
	}
	p.rule.MostHits = 1
	p.Find(w, u, 1, 0, nil)
	require.True(t, w.Ambiguous)

	_, p = onePursuit(t)
	w = p.NewWork()
	clear(u)
	for k := range 12 {
		for i, a := range p.atom(9 * k) {
			u[i] += float64(30+k) * a
		}
	}
	p.Find(w, u, 1, 0, nil)
	require.Greater(t, w.Left, 1+5*math.Sqrt(2.0/float64(p.g)))
}

// A search allocates nothing.
func TestPursuitAllocates(t *testing.T) {
	_, p := onePursuit(t)
	w, u := p.NewWork(), make([]float64, p.g)
	for i := range u {
		u[i] = 30*p.atom(3)[i] + 20*p.atom(60)[i]
	}
	require.Zero(t, testing.AllocsPerRun(10, func() { p.Find(w, u, 1, 0.01, nil) }))
	require.Len(t, w.Hits, 2)
}
