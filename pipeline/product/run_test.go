package product

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
)

func TestRunRoundTrip(t *testing.T) {
	chi2, hits := 1.02, 0
	run := &Run{
		Schema: RunSchema, Version: "0.1.0", CPULevel: "avx512",
		Inputs:   []Input{{File: "sequence.fits", SHA256: "ab"}},
		Settings: map[string]any{"memory": "512MiB", "recipe": map[string]any{"sky": "off"}},
		Quality:  Quality{GoodFraction: 0.7, CoveredGoodFraction: 0.99, DarkChi2Heldout: &chi2, Hits: &hits},
		Warnings: []string{`a <warning> & "quotes"`},
		Stages:   []Stage{{Name: "strips", Seconds: 1.5, Bytes: 1 << 40}},
		Exit:     3,
	}
	path := filepath.Join(t.TempDir(), RunFile)
	require.NoError(t, fitsutil.WriteAtomic(path, run.Write))
	back, err := ReadRun(path)
	require.NoError(t, err)
	require.Equal(t, run, back)
	// What was not measured is null, and what was measured as none is 0.
	text, err := os.ReadFile(path)
	require.NoError(t, err)
	require.Contains(t, string(text), `"throughput_rms": null`)
	require.Contains(t, string(text), `"hits": 0`)
}

func TestReadRunRefuses(t *testing.T) {
	dir := t.TempDir()
	for _, c := range []struct{ text, want string }{
		{"", "unexpected end"},
		{"{", "unexpected end"},
		{"[]", "cannot unmarshal"},
		{"{}", "schema 0, want 1"},
		{`{"schema": 2}`, "schema 2, want 1"},
		{`{"schema": 1, "exit": "none"}`, "cannot unmarshal"},
	} {
		path := filepath.Join(dir, RunFile)
		require.NoError(t, os.WriteFile(path, []byte(c.text), 0o644))
		r, err := ReadRun(path)
		require.Nil(t, r)
		require.ErrorContains(t, err, c.want)
		require.ErrorContains(t, err, "make it again with reduce")
	}
	_, err := ReadRun(filepath.Join(dir, "gone"))
	require.ErrorIs(t, err, os.ErrNotExist)
}
