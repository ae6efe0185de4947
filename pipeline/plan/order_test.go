package plan_test

import (
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// Every order is a permutation of the rows in every cycle, for every kind of code, and leaves
// the lamp's cycles as they were shuffled.
func TestOrdersArePermutations(t *testing.T) {
	for _, c := range []struct {
		family  string
		v, dark int
	}{{"m-sequence", 63, 16}, {"legendre", 43, 11}, {"singer", 57, 12}, {"singer-complement", 57, 12}, {"slit-scan", 50, 0}, {"m-sequence", 31, 0}} {
		for _, order := range sequence.Orders() {
			target, profile := demo(t)
			target.Code.Family, target.Code.V, target.Code.Dark = c.family, &c.v, &c.dark
			target.Code.Order, target.Code.Cycles = order, 2
			s, _ := build(t, target, profile)
			for cycle := 1; cycle <= 2; cycle++ {
				rows := rowsOf(s, sequence.Science, cycle)
				require.Equal(t, natural(c.v), slices.Sorted(slices.Values(rows)), "%s %s", c.family, order)
			}
			if order == sequence.OrderDrift && c.dark > 0 {
				back := rowsOf(s, sequence.Science, 2)
				slices.Reverse(back)
				require.Equal(t, rowsOf(s, sequence.Science, 1), back)
			}
		}
	}
}

func natural(v int) []int {
	rows := make([]int, v)
	for i := range rows {
		rows[i] = i
	}
	return rows
}

// What a short night loses, held against least squares on the lit columns of the rows that
// are left (the diagonal of (M'M)^-1), worked out here from the sequence's bits.
func TestShortNightsAgreeWithLeastSquares(t *testing.T) {
	for _, order := range []string{sequence.OrderShuffled, sequence.OrderNested, sequence.OrderDrift} {
		target, profile := demo(t)
		v, dark := 63, 16
		target.Code.V, target.Code.Dark, target.Code.Order = &v, &dark, order
		s, summary := build(t, target, profile)
		n := summary.ShortNights[0]
		require.True(t, n.Planned)
		require.Equal(t, order, n.Order)
		require.Len(t, n.Tails, 3)
		rows := rowsOf(s, sequence.Science, 1)
		code, err := hadamard.New(hadamard.MSequence, v)
		require.NoError(t, err)
		for i, fraction := range []float64{0.10, 0.25, 0.50} {
			tail := n.Tails[i]
			require.InDelta(t, fraction*float64(v), tail.Steps, 0.5)
			require.Equal(t, tail.Steps, tail.Rows)
			want, ok := leastSquaresNoise(code, s.DarkColumns(), rows[:v-tail.Steps])
			whole, _ := leastSquaresNoise(code, nil, rows) // as decoded: with all columns free
			if tail.Steps > dark {
				require.False(t, ok)
				require.Zero(t, tail.Elements)
				continue
			}
			if tail.Elements == 0 {
				require.True(t, !ok || want/whole > 4)
				continue
			}
			require.Equal(t, 1., tail.Elements)
			// Dark columns that are not asked for the lost rows could better the others a
			// little: least squares is at most as noisy as the restored rows.
			require.LessOrEqual(t, want/whole, tail.Noise+1e-9, "%s %v", order, fraction)
			require.Greater(t, tail.Noise, 1.)
		}
	}
}

// Losing half of two cycles leaves one whole; half of one leaves nothing.
func TestSeveralShortCyclesSurvive(t *testing.T) {
	target, profile := demo(t)
	target.Code.Cycles = 2
	_, summary := build(t, target, profile)
	half := summary.ShortNights[0].Tails[2]
	require.Equal(t, 1., half.Elements)
	require.InDelta(t, 1.41421356, half.Noise, 1e-6)
	target.Code.Cycles = 1
	_, summary = build(t, target, profile)
	require.Zero(t, summary.ShortNights[0].Tails[2].Elements)
	more := summary.ShortNights[len(summary.ShortNights)-1]
	require.Equal(t, 4, more.Cycles)
	require.Equal(t, 1., more.Tails[2].Elements)
}

// The order made for it stands the loss of a tenth with less noise than a shuffle, and that
// for a drift leaves a tenth of its error or less: for an m-sequence a ramp is a sum of dark
// columns.
func TestOrdersDoWhatTheyAreFor(t *testing.T) {
	for _, family := range []string{"m-sequence", "legendre", "singer"} {
		v, dark := 127, 16
		switch family {
		case "legendre":
			v = 131
		case "singer":
			v, dark = 121, 20
		}
		target, profile := demo(t)
		target.Code.Family, target.Code.V, target.Code.Dark = family, &v, &dark
		_, summary := build(t, target, profile)
		by := map[string]plan.ShortNight{}
		for _, n := range summary.ShortNights {
			if n.Cycles == 1 {
				by[n.Order] = n
			}
		}
		shuffled, nested, drift := by[sequence.OrderShuffled], by[sequence.OrderNested], by[sequence.OrderDrift]
		t.Logf("%s: tenth lost %.2f shuffled, %.2f nested; drift %.4f shuffled, %.4f in order", family, shuffled.Tails[0].Noise, nested.Tails[0].Noise, shuffled.DriftError, drift.DriftError)
		require.Positive(t, nested.Tails[0].Noise)
		if shuffled.Tails[0].Noise > 0 {
			require.Less(t, nested.Tails[0].Noise, shuffled.Tails[0].Noise)
		}
		bound := 0.5
		if family == "m-sequence" {
			bound = 0.1
		}
		require.Less(t, drift.DriftError, bound*shuffled.DriftError)
	}
}

// A slit scan cut short has seen the field at every second element, or every fourth.
func TestNestedSlitScanSeesTheWholeField(t *testing.T) {
	target, profile := demo(t)
	v, dark := 64, 0
	target.Code.Family, target.Code.V, target.Code.Dark, target.Code.Order = "slit-scan", &v, &dark, sequence.OrderNested
	s, summary := build(t, target, profile)
	half := slices.Sorted(slices.Values(rowsOf(s, sequence.Science, 1)[:32]))
	for i, row := range half {
		require.Equal(t, 2*i, row)
	}
	require.InDelta(t, 0.5, summary.ShortNights[0].Tails[2].Elements, 1e-12)
}
