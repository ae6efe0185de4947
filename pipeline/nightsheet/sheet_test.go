package nightsheet_test

import (
	"context"
	"encoding/json"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/nightsheet"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

func made(t *testing.T, target, profile string) *nightsheet.Sheet {
	t.Helper()
	p, err := instrument.Load(profile)
	require.NoError(t, err)
	g, err := sequence.LoadTarget(target)
	require.NoError(t, err)
	s, r, err := plan.Build(context.Background(), g, p)
	require.NoError(t, err)
	sheet, err := nightsheet.Make(s, r)
	require.NoError(t, err)
	return sheet
}

// The same plan gives the same bytes; the sequence is read with the sheet and without it.
func TestSheetInSequence(t *testing.T) {
	a, b := planned(t, "demo-visible", "visible"), planned(t, "demo-visible", "visible")
	for _, name := range []string{nightsheet.HTMLFile, nightsheet.JSONFile} {
		one, err := os.ReadFile(filepath.Join(a, name))
		require.NoError(t, err)
		other, err := os.ReadFile(filepath.Join(b, name))
		require.NoError(t, err)
		require.Equal(t, one, other)
		require.NotContains(t, string(one), filepath.Dir(a), "a path of this machine")
	}
	_, err := sequence.Read(context.Background(), a)
	require.NoError(t, err)
	require.NoError(t, os.Remove(filepath.Join(b, nightsheet.HTMLFile)))
	require.NoError(t, os.Remove(filepath.Join(b, nightsheet.JSONFile)))
	_, err = sequence.Read(context.Background(), b)
	require.NoError(t, err)

	err = nightsheet.Write(filepath.Join(a, "nowhere"), made(t, "demo", "optical").Sequence(), made(t, "demo", "optical").Summary)
	require.ErrorIs(t, err, fs.ErrNotExist)
}

// plan.json has the summary's keys at its top, a schema, and every step once.
func TestJSON(t *testing.T) {
	text, err := os.ReadFile(filepath.Join(planned(t, "proposal", "optical"), nightsheet.JSONFile))
	require.NoError(t, err)
	var sheet struct {
		Schema int     `json:"schema"`
		Target string  `json:"target"`
		Steps  int     `json:"steps"`
		SHA    string  `json:"sequence_sha256"`
		Min    float64 `json:"minutes"`
		Order  []struct {
			Step    int     `json:"step"`
			MaskID  string  `json:"maskid"`
			Exptime float64 `json:"exptime_s"`
		} `json:"steps_in_order"`
		Runs []struct {
			First   int     `json:"first_step"`
			Last    int     `json:"last_step"`
			Minutes float64 `json:"minutes"`
		} `json:"runs"`
		Sizes []any `json:"calibration_sizes"`
		Trade any   `json:"trade"`
	}
	require.NoError(t, json.Unmarshal(text, &sheet))
	require.Equal(t, nightsheet.Schema, sheet.Schema)
	require.Equal(t, "proposal", sheet.Target)
	require.Len(t, sheet.SHA, 64)
	require.Len(t, sheet.Sizes, 5)
	require.NotNil(t, sheet.Trade)
	require.Len(t, sheet.Order, sheet.Steps)
	for i, st := range sheet.Order {
		require.Equal(t, i+1, st.Step)
		require.Len(t, st.MaskID, 16)
	}
	next, minutes := 1, 0.0
	for _, r := range sheet.Runs {
		require.Equal(t, next, r.First)
		require.GreaterOrEqual(t, r.Last, r.First)
		next, minutes = r.Last+1, minutes+r.Minutes
	}
	require.Equal(t, sheet.Steps+1, next)
	require.InDelta(t, sheet.Min, minutes, 1e-6)
}

// What stands in a target is text, never markup.
func TestHTMLEscapes(t *testing.T) {
	var b strings.Builder
	require.NoError(t, made(t, "testdata/crowded.yaml", "optical").WriteHTML(&b))
	for _, bad := range []string{"<b>&", "<i>"} {
		require.NotContains(t, b.String(), bad)
	}
	require.Contains(t, b.String(), "&lt;b&gt;&amp;amp;")
	for _, outer := range []string{"<script", "http:", "https:", "url(file", "<link", "<img"} {
		require.NotContains(t, b.String(), outer)
	}
}

// The verdict is a sentence that follows from the trade's figures, or says that nobody knows.
func TestVerdict(t *testing.T) {
	s := made(t, "proposal", "optical")
	require.Regexp(t, `^Multiplexing pays: singer of v = 156 gives 1\.\d\d times the S/N of the faintest wanted that a slit scan gives in the same time\.$`, s.Verdict)
	require.Contains(t, made(t, "demo", "optical").Verdict, "nobody can say without a forecast")
	require.Contains(t, made(t, "testdata/slit.yaml", "optical").Verdict, "Nothing is multiplexed")
	require.Contains(t, made(t, "testdata/crowded.yaml", "optical").Verdict, "is not within its limits: its brightest pixel saturates")
}
