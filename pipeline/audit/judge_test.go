package audit

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/hadamard"
)

// field is light that no rehearsal made: elements with a continuum, stars and lines,
// each pixel another mixture.
type field struct {
	code           *hadamard.Code
	dark, elements []int
	light          [][]float64 // [element][pixel], electrons
	order          []int
	read           float64
}

// newField has so many pixels of raw signal to noise sn in the mean.
func newField(t testing.TB, v, g, pixels int, sn float64, seed uint64) *field {
	t.Helper()
	code, err := hadamard.New(hadamard.MSequence, v)
	require.NoError(t, err)
	set, err := hadamard.ChooseDark(context.Background(), code, g, seed)
	require.NoError(t, err)
	r := rand.New(rand.NewPCG(seed, 1))
	f := &field{code: code, dark: set.Columns, order: r.Perm(v), read: 4}
	for c := range v {
		if !slices.Contains(set.Columns, c) {
			f.elements = append(f.elements, c)
		}
	}
	n := len(f.elements)
	total := sn * (sn/2 + math.Sqrt(sn*sn/4+f.read*f.read)) // y = sn sqrt(y + read^2)
	slope := r.Float64()
	for j := range n {
		row := make([]float64, pixels)
		star := 1 + 6*math.Exp(-math.Pow(float64(j-n/3), 2)/8)
		for p := range row {
			wave := float64(p%97)/97 - float64(j)/float64(2*n)
			line := 4 * math.Exp(-math.Pow(float64((p-3*j)%97)-40, 2)/8)
			row[p] = 2 * total / float64(n) * (star*(1+slope*wave)*math.Abs(math.Sin(float64(p/97)+1)) + line)
		}
		f.light = append(f.light, row)
	}
	return f
}

// shot is what a frame shows.
type shot struct {
	weights []float64 // of elements
	factor  float64
}

func (f *field) bits(row int) []float64 {
	w := make([]float64, len(f.elements))
	for j, c := range f.elements {
		w[j] = float64(f.code.Bit(row, c))
	}
	return w
}

// night has the frames of the steps in order, as commanded, with a drift.
func (f *field) night(drift, trend float64, seed uint64) []shot {
	r := rand.New(rand.NewPCG(seed, 2))
	var all []shot
	for t, row := range f.order {
		c := (1 + drift*r.NormFloat64()) * (1 + trend*(float64(t)/float64(len(f.order)-1)-0.5))
		all = append(all, shot{f.bits(row), c})
	}
	return all
}

// expose makes the cycle of frames, labelled in their order.
func (f *field) expose(shots []shot, seed uint64) *Cycle {
	pixels := len(f.light[0])
	y, s2 := make([]float32, len(shots)*pixels), make([]float32, len(shots)*pixels)
	r := rand.New(rand.NewPCG(seed, 3))
	for m, s := range shots {
		for p := range pixels {
			light := 0.0
			for j, w := range s.weights {
				light += w * f.light[j][p]
			}
			light *= s.factor
			pedestal := 0.3 + 0.2*math.Sin(float64(p))
			read := light + math.Sqrt(light+f.read*f.read)*r.NormFloat64() + pedestal
			y[m*pixels+p], s2[m*pixels+p] = float32(read), float32(read-pedestal+f.read*f.read)
		}
	}
	c := &Cycle{Code: f.code, Dark: f.dark, Elements: f.elements, Gram: hadamard.NewGram(len(shots)), Order: f.order, Mirrors: 2}
	c.Gram.Add(y, s2, pixels, pixels, 1)
	c.Pairing = make([]int, f.code.V())
	for k := range c.Pairing {
		c.Pairing[k] = none
	}
	for m := range shots {
		if m < len(f.order) {
			c.Pairing[f.order[m]] = m
		}
		c.Place = append(c.Place, float64(m)/float64(len(shots)-1)-0.5)
		c.Time = append(c.Time, m)
	}
	return c
}

// wrong makes the frame of step t show its mask wrongly.
func (f *field) wrong(s []shot, t int, m move) {
	e := &engine{Cycle: &Cycle{Code: f.code, Elements: f.elements, Mirrors: 2}}
	m.row = f.order[t]
	s[t].weights = e.weightsOf(m)
}

func exchange(s []shot, a, b int) { s[a].weights, s[b].weights = s[b].weights, s[a].weights }

// rearrange shows in step t the mask of step to(t).
func (f *field) rearrange(s []shot, to func(t int) int) {
	for t := range s {
		s[t].weights = f.bits(f.order[to(t)%len(f.order)])
	}
}

// Every row is a fault of a night of 63 frames with a throughput of 5 % scatter and 30 %
// trend, and what must be found of it: kind, step of the label, step shown.
func TestJudge(t *testing.T) {
	const v = 63
	for _, c := range []struct {
		name  string
		fault func(f *field, s []shot)
		whole string
		want  []string
	}{
		{"none", func(*field, []shot) {}, "", nil},
		{"two exchanged", func(_ *field, s []shot) { exchange(s, 11, 40) }, "", []string{"exchanged 11 40", "exchanged 40 11"}},
		{"three in a circle", func(_ *field, s []shot) { exchange(s, 11, 40); exchange(s, 40, 3) }, "", []string{"moved 3 11", "moved 11 40", "moved 40 3"}},
		{"the step before's mask", func(f *field, s []shot) { s[5].weights = s[4].weights }, "", []string{"stale 5 4"}},
		{"inverted", func(f *field, s []shot) { f.wrong(s, 5, move{kind: Inverted}) }, "", []string{"inverted 5 -1"}},
		{"flipped", func(f *field, s []shot) { f.wrong(s, 30, move{kind: Flipped}) }, "", []string{"flipped 30 -1"}},
		{"slipped by an element", func(f *field, s []shot) { f.wrong(s, 8, move{kind: Slipped, mirrors: 2}) }, "", []string{"slipped 8 -1"}},
		{"all open, as no mask is", func(f *field, s []shot) {
			for j := range s[9].weights {
				s[9].weights[j] = 1
			}
		}, "", []string{"unknown 9 -1"}},
		{"several", func(f *field, s []shot) {
			exchange(s, 11, 40)
			exchange(s, 50, 2)
			f.wrong(s, 20, move{kind: Inverted})
		}, "", []string{"exchanged 2 50", "exchanged 11 40", "inverted 20 -1", "exchanged 40 11", "exchanged 50 2"}},
		{"off by one", func(f *field, s []shot) { f.rearrange(s, func(t int) int { return t + 1 }) }, "off by 1: each shows the mask of 1 step later", nil},
		{"off by ten back", func(f *field, s []shot) { f.rearrange(s, func(t int) int { return t + v - 10 }) }, "off by 10: each shows the mask of 10 steps earlier", nil},
		{"reversed", func(f *field, s []shot) { f.rearrange(s, func(t int) int { return v - 1 - t }) }, "reversed", nil},
		{"interleaved", func(f *field, s []shot) {
			f.rearrange(s, func(t int) int {
				if t < 32 {
					return 2 * t
				}
				return 2*(t-32) + 1
			})
		}, "interleaved: the first half shows every second mask, the second half the others", nil},
		{"a mask passed over", func(f *field, s []shot) {
			f.rearrange(s[20:v-1], func(t int) int { return t + 21 })
			s[v-1].weights = s[3].weights
		}, "one step on from frame 21 of 63, as if a mask had been passed over", nil},
		{"a mask shown twice", func(f *field, s []shot) {
			f.rearrange(s[31:], func(t int) int { return t + 30 })
		}, "one step back from frame 3", nil}, // 31 or 32: both show it
	} {
		t.Run(c.name, func(t *testing.T) {
			f := newField(t, v, 16, 2500, 9, 4)
			s := f.night(0.05, 0.3, 7)
			c.fault(f, s)
			got, err := Judge(f.expose(s, 11))
			require.NoError(t, err)
			require.Equal(t, c.whole != "", got.Whole != "", got.Whole)
			require.Contains(t, got.Whole, c.whole)
			var found []string
			at := func(row int) int { return slices.Index(f.order, row) }
			findings := slices.Clone(got.Findings)
			slices.SortFunc(findings, func(a, b Finding) int { return at(a.Row) - at(b.Row) })
			for _, x := range findings {
				require.Greater(t, x.LogOdds, sureLogOdds)
				found = append(found, fmt.Sprintf("%s %d %d", x.Kind, at(x.Row), at(x.Shows)))
			}
			require.Equal(t, c.want, found)
			require.InDelta(t, 1, got.Chi2, 0.05)
			require.False(t, got.AllInverted)
		})
	}
}

// Nights without a fault, faint and bright, raise no alarm.
func TestJudgeLeavesCleanNightsAlone(t *testing.T) {
	for seed := range uint64(10) {
		f := newField(t, 63, 16, 1200, 2+2*float64(seed), seed)
		c := f.expose(f.night(0.05, 0.3, seed), seed)
		got, err := Judge(c)
		require.NoError(t, err)
		require.Empty(t, got.Findings)
		require.Empty(t, got.Whole)
		require.Equal(t, c.Pairing, got.Pairing)
	}
}

// The frame test alarms in the same draws of noise as that of hadamard, whose law is
// counted over many.
func TestThresholdMeetsHadamard(t *testing.T) {
	const v, pixels, alpha = 31, 150, 0.2
	code, err := hadamard.New(hadamard.MSequence, v)
	require.NoError(t, err)
	set, err := hadamard.ChooseDark(t.Context(), code, 10, 1)
	require.NoError(t, err)
	checks, err := hadamard.NewChecks(code, set.Columns)
	require.NoError(t, err)
	checks = checks.WithoutPedestal()
	r := rand.New(rand.NewPCG(1, 2))
	alarms := 0
	for range 100 {
		y, s2 := make([]float32, v*pixels), make([]float32, v*pixels)
		for i := range y {
			y[i], s2[i] = float32(r.NormFloat64()), 1
		}
		c := &Cycle{Code: code, Dark: set.Columns, Gram: hadamard.NewGram(v), Place: make([]float64, v)}
		c.Gram.Add(y, s2, pixels, pixels, 1)
		for k := range v {
			c.Pairing, c.Order = append(c.Pairing, k), append(c.Order, k)
		}
		e, err := newEngine(c)
		require.NoError(t, err)
		suspect := len(e.unfitted(c.Pairing, nil).suspects(alpha, 0)) > 0
		least := 0.0
		for _, x := range checks.FrameTests(c.Gram) {
			least = min(least, x.LogP)
		}
		require.Equal(t, least < hadamard.FalseAlarm(alpha, v), suspect)
		if suspect {
			alarms++
		}
	}
	require.InDelta(t, alpha*100, alarms, 5*math.Sqrt(alpha*100))
}
