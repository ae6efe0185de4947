package audit_test

import (
	"fmt"
	"os"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
)

func plan(t *testing.T) *trial.Night {
	t.Helper()
	field, err := trial.Square()
	require.NoError(t, err)
	n, err := field.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	return n
}

func faults(t *testing.T, list ...string) []rehearse.Fault {
	t.Helper()
	var all []rehearse.Fault
	for _, text := range list {
		f, err := rehearse.ParseFault(text)
		require.NoError(t, err)
		all = append(all, f)
	}
	return all
}

// Rehearsed nights with wrong frames among 63, throughput drifting by 5 %: what is
// wrong is found, exchanged frames are put right, nothing else is touched.
func TestAuditFindsFaults(t *testing.T) {
	n := plan(t)
	for i, c := range []struct {
		faults     []string
		wrong      int
		relabelled int
	}{
		{[]string{"drift=0.05"}, 0, 0},
		{[]string{"drift=0.05", "mislabel=4"}, 4, 4},
		{[]string{"drift=0.05", "stale=2", "cosmic=0.5"}, 2, 0},
		{[]string{"drift=0.05", "flip=1", "invert=1", "lost=1"}, 2, 0},
	} {
		name := fmt.Sprint(i)
		require.NoError(t, n.Rehearse(t.Context(), name, rehearse.Options{Seed: uint64(i), NoTruth: true, Faults: faults(t, c.faults...)}))
		got, err := n.Audit(t.Context(), name, pair.Options{})
		require.NoError(t, err)
		require.Len(t, got.Wrong, c.wrong)
		require.Empty(t, got.Missed, "%v", c.faults)
		require.Empty(t, got.Mistaken, "%v", c.faults)
		require.Empty(t, got.False, "%v", c.faults)
		require.Equal(t, c.relabelled, got.Night.Ledger.Count(product.Relabelled))
		require.Len(t, got.Night.Audit.Warnings(), c.wrong)
		if i == 1 { // the labels kept, and the workers another number
			kept, err := n.Audit(t.Context(), name, pair.Options{AsLabelled: true, Workers: 1})
			require.NoError(t, err)
			require.Len(t, kept.Missed, c.wrong)
			for k, f := range kept.Night.Audit.Cycles[0].Findings {
				repaired := got.Night.Audit.Cycles[0].Findings[k]
				require.Equal(t, repaired.Log10Odds, f.Log10Odds, "the same bits")
				require.Contains(t, f.Text, "used as labelled")
			}
		}
		require.NoError(t, os.RemoveAll(n.Frames(name)))
	}
}

// On a faint night a hit in a dark frame would take light, and the noise that belongs to
// it, from all frames, and hide what is wrong with them.
func TestAuditOfFaintNights(t *testing.T) {
	field, err := trial.Square()
	require.NoError(t, err)
	field.Dim(2.5)
	n, err := field.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, n.Rehearse(t.Context(), "faint", rehearse.Options{Seed: 6, NoTruth: true, Faults: faults(t, "drift=0.05", "cosmic=2", "mislabel=2", "invert=1")}))
	got, err := n.Audit(t.Context(), "faint", pair.Options{})
	require.NoError(t, err)
	require.Len(t, got.Wrong, 3)
	require.Empty(t, got.Missed)
	require.Empty(t, got.Mistaken)
	require.Empty(t, got.False)
	require.InDelta(t, 1, got.Night.Audit.Cycles[0].Chi2, 0.01)
}

// Masks that are all inverted leave the dark columns dark, but turn the light.
func TestAuditNamesInvertedNights(t *testing.T) {
	n := plan(t)
	require.NoError(t, n.Rehearse(t.Context(), "inverted", rehearse.Options{Seed: 3, NoTruth: true, Faults: faults(t, "invert")}))
	got, err := pair.Run(t.Context(), n.Seq, pair.Options{Night: n.Frames("inverted"), Audit: true}, nil)
	require.NoError(t, err)
	require.True(t, got.Audit.Inverted())
	require.Len(t, got.Audit.Warnings(), 1)
	require.Contains(t, got.Audit.Warnings()[0], "every mask is inverted")
}

// Sequences without dark columns enough are told so.
func TestAuditSaysWhyNot(t *testing.T) {
	field, err := trial.Tiny()
	require.NoError(t, err)
	field.SetCode("m-sequence", 31, 6)
	n, err := field.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, n.Rehearse(t.Context(), "plain", rehearse.Options{NoTruth: true}))
	got, err := pair.Run(t.Context(), n.Seq, pair.Options{Night: n.Frames("plain"), Audit: true}, nil)
	require.NoError(t, err)
	require.Equal(t, []string{"the pairing was not audited: the sequence has 6 dark columns, of the 10 that 31 code columns need (2 log2 v)"}, got.Audit.Warnings())
}

// Nights whose masks are all others than labelled: every frame is given to the step that
// it shows.
func TestAuditFindsOrders(t *testing.T) {
	n := plan(t)
	for what, order := range map[string]func(t, n int) int{
		"off by 3: each shows the mask of 3 steps later": func(t, n int) int { return (t + 3) % n },
		"one step on from frame 21 of 63": func(t, n int) int {
			if t < 20 {
				return t
			}
			return (t + 1) % n
		},
	} {
		name := what[:3]
		require.NoError(t, n.RehearseOrder(t.Context(), name, order, rehearse.Options{Seed: 5, NoTruth: true, Faults: faults(t, "drift=0.05", "trend=-0.3", "mislabel=2")}))
		got, err := n.Audit(t.Context(), name, pair.Options{})
		require.NoError(t, err)
		require.Contains(t, got.Night.Audit.Cycles[0].Whole, what)
		require.GreaterOrEqual(t, len(got.Wrong), 40)
		require.Empty(t, got.Missed)
		require.Empty(t, got.Mistaken)
		require.Empty(t, got.False)
		require.NoError(t, os.RemoveAll(n.Frames(name)))
	}
}
