package audit_test

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// strip renames the cards of a night's frames that tell their step and mask.
func strip(t *testing.T, dir string) {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(dir, "*.fits"))
	require.NoError(t, err)
	for _, path := range files {
		data, err := os.ReadFile(path)
		require.NoError(t, err)
		header := data[:min(len(data), 4*2880)]
		for i := 0; i+80 <= len(header); i += 80 {
			if key := string(header[i : i+8]); key == "STEP    " || key == "MASKID  " {
				copy(header[i:], "COMMENT  ")
			}
		}
		require.NoError(t, os.WriteFile(path, data, 0o644))
		f, err := fitsutil.Open(path)
		require.NoError(t, err)
		require.False(t, f.HDUs()[0].Header.Has("STEP"))
		require.NoError(t, f.Close())
	}
}

// A night that knows its kinds and times alone is paired by time; a frame missing, or
// one too many, at an unknown place is found by the audit.
func TestUnlabelledNights(t *testing.T) {
	n := plan(t)
	science := n.Seq.StepsOf(sequence.Science)
	at := n.Seq.Steps[science[20]].Step
	for name, change := range map[string]func(path string, f *trial.Night){
		"whole":   func(string, *trial.Night) {},
		"missing": func(path string, _ *trial.Night) { require.NoError(t, os.Remove(path)) },
	} {
		require.NoError(t, n.Rehearse(t.Context(), name, rehearse.Options{Seed: 8, NoTruth: true, Faults: faults(t, "drift=0.05")}))
		strip(t, n.Frames(name))
		change(filepath.Join(n.Frames(name), rehearse.FrameFile(at)), n)
		got, err := pair.Run(t.Context(), n.Seq, pair.Options{Night: n.Frames(name), Audit: true}, nil)
		require.NoError(t, err)
		for _, i := range science {
			e := got.Ledger[i]
			if name == "missing" && e.Step == at {
				require.Equal(t, product.Missing, e.Verdict)
				continue
			}
			require.Equal(t, rehearse.FrameFile(e.Step), e.File, name)
			require.Equal(t, product.OK, e.Verdict, e.Note)
		}
		if name == "missing" {
			require.Equal(t, product.ByTime, got.Ledger[science[0]].MatchedBy)
			require.Equal(t, product.ByAudit, got.Ledger[science[30]].MatchedBy)
		}
	}
}
