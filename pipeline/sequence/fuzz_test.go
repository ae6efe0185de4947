package sequence_test

import (
	"context"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// tiny plans seven code columns on a device of 9 x 4 mirrors.
func tiny(f *testing.F) *sequence.Sequence {
	f.Helper()
	const text = `
name: tiny
ra_deg: 1
dec_deg: 2
start_utc: 2031-02-11T04:00:00Z
code: {family: m-sequence, v: 7, dark: 2, element_mirrors: 1, seed: 1}
dwell_s: 1
all_off_every: 4
sentinel_rows: [{first: 1, last: 1, element: 2}]
closed: [{first: 3, last: 3}]
calibration:
  flat: {count: 1, dwell_s: 1, lamp: halogen}
`
	target, err := sequence.ParseTarget("tiny.yaml", []byte(text))
	require.NoError(f, err)
	profile, err := instrument.Load("optical")
	require.NoError(f, err)
	profile.DMD.Columns, profile.DMD.Rows, profile.DMD.Mounting = 9, 4, instrument.Square
	s, _, err := plan.Build(context.Background(), target, profile)
	require.NoError(f, err)
	return s
}

// FuzzRead changes sequence.fits (the other files are guarded by digests): no
// bytes make the reader panic, and what it takes is consistent enough to be
// written again.
func FuzzRead(f *testing.F) {
	dir := filepath.Join(f.TempDir(), "sequence")
	require.NoError(f, tiny(f).Write(context.Background(), dir))
	path := filepath.Join(dir, "sequence.fits")
	whole, err := os.ReadFile(path)
	require.NoError(f, err)
	f.Add(uint32(0), byte(0), uint32(0), byte(0), uint32(len(whole)))
	f.Add(uint32(80*9+25), byte('1'), uint32(0), byte('S'), uint32(len(whole)))
	f.Add(uint32(2880*2), byte(1), uint32(2880*2+3), byte(3), uint32(len(whole)-1))
	// The corpus is two changed bytes and a length: changes of the whole text
	// would mostly meet the FITS reader, which has fuzz targets of its own.
	f.Fuzz(func(t *testing.T, at1 uint32, byte1 byte, at2 uint32, byte2 byte, length uint32) {
		data := append([]byte{}, whole...)
		data[int(at1)%len(data)] = byte1
		data[int(at2)%len(data)] = byte2
		if int(length) < len(data) {
			data = data[:length]
		}
		changed := filepath.Join(dir, "sequence.fits")
		require.NoError(t, os.WriteFile(changed, data, 0o644))
		s, err := sequence.Read(context.Background(), dir)
		if err != nil {
			require.Nil(t, s)
			return
		}
		require.NoError(t, s.Write(context.Background(), filepath.Join(t.TempDir(), "again")))
	})
}
