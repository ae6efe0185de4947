package sequence_test

import (
	"context"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// smallTarget plans 31 columns, 7 of them dark, with every kind of row range:
// sentinel rows, rows closed for all and rows closed for one element.
const smallTarget = `
name: small field
ra_deg: 10.5
dec_deg: -3
start_utc: 2031-02-11T04:00:00Z
code: {family: m-sequence, v: 31, dark: 7, element_mirrors: 2, seed: 5, cycles: 2}
dwell_s: 30
all_off_every: 10
sentinel_rows:
  - {first: 3, last: 5, element: 20}
  - {first: -6, last: -5, element: 1}
closed:
  - {first: 8, last: 9}
  - {first: 9, last: 9, element: 4}
  - {first: 10, last: 14, element: 0}
calibration:
  bias: {count: 2}
  dark: {count: 1, dwell_s: 30}
  flat: {count: 1, dwell_s: 5, lamp: halogen, coded_cycles: 1}
  arc: {count: 1, dwell_s: 8, lamp: NeAr, every: 5}
`

// small gives smallTarget and the embedded optical profile with a small device
// in one of the mountings. Rows are negative in the diagonal mounting only: the
// square one gets others.
func small(t testing.TB, mounting string) (*sequence.Target, *instrument.Profile) {
	t.Helper()
	target, err := sequence.ParseTarget("small.yaml", []byte(smallTarget))
	require.NoError(t, err)
	profile, err := instrument.Load("optical")
	require.NoError(t, err)
	profile.DMD.Columns, profile.DMD.Rows, profile.DMD.Mounting = 53, 30, mounting
	if mounting == instrument.Square {
		target.SentinelRows[1].First, target.SentinelRows[1].Last = 20, 22
	}
	return target, profile
}

// build plans a target on a profile.
func build(t testing.TB, target *sequence.Target, profile *instrument.Profile) *sequence.Sequence {
	t.Helper()
	s, _, err := plan.Build(context.Background(), target, profile)
	require.NoError(t, err)
	return s
}

// write writes a sequence into a new folder and returns it.
func write(t testing.TB, s *sequence.Sequence) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "sequence")
	require.NoError(t, s.Write(context.Background(), dir))
	return dir
}

// clone copies what tests edit.
func clone(s *sequence.Sequence) *sequence.Sequence {
	c := *s
	c.Steps, c.Code = slices.Clone(s.Steps), slices.Clone(s.Code)
	c.Elements, c.Rows = slices.Clone(s.Elements), slices.Clone(s.Rows)
	return &c
}

// contents reads every file below a folder, by relative path.
func contents(t testing.TB, dir string) map[string]string {
	t.Helper()
	files := map[string]string{}
	require.NoError(t, filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		name, err := filepath.Rel(dir, path)
		files[name] = string(data)
		return err
	}))
	return files
}
