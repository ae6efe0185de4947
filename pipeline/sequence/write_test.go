package sequence_test

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

func TestWriteGivesTheSameBytesOnAnyWorkers(t *testing.T) {
	target, profile := small(t, instrument.Diagonal)
	var want map[string]string
	for _, workers := range []int{1, 2, 7, 64} {
		dir := filepath.Join(t.TempDir(), "sequence")
		s := build(t, target, profile)
		require.NoError(t, s.WriteWith(context.Background(), dir, workers))
		got := contents(t, dir)
		if want == nil {
			want = got
			require.Greater(t, len(want), 70)
		}
		require.Equal(t, want, got, fmt.Sprint(workers, " workers"))
	}
}

func TestWriteFillsInDigests(t *testing.T) {
	target, profile := small(t, instrument.Square)
	s := build(t, target, profile)
	dir := write(t, s)
	require.Equal(t, profile.SHA(), s.ProfileSHA)
	require.Equal(t, "optical", s.ProfileName)
	for i, st := range s.Steps {
		require.Equal(t, s.Mask(i).ID(), st.MaskID)
	}
	// Written again elsewhere, with everything filled in: the same bytes.
	sha := s.SHA
	again := write(t, s)
	require.Equal(t, sha, s.SHA)
	require.Equal(t, contents(t, dir), contents(t, again))
}

func TestWriteCopiesCSVFiles(t *testing.T) {
	target, err := sequence.ParseTarget("small.yaml", []byte(smallTarget))
	require.NoError(t, err)
	target.SentinelRows, target.Closed = nil, nil
	plain, err := instrument.Load("optical")
	require.NoError(t, err)
	plain.DMD.StuckCSV = "stuck.csv"
	text, err := plain.YAML()
	require.NoError(t, err)
	const csv = "column,row,state\n12,3,on\n100,40,off\n"
	profile, err := instrument.Parse("profile.yaml", text, func(string) ([]byte, error) { return []byte(csv), nil })
	require.NoError(t, err)
	dir := write(t, build(t, target, profile))
	require.Equal(t, csv, contents(t, dir)["stuck.csv"])
	s, err := sequence.Read(context.Background(), dir)
	require.NoError(t, err)
	require.Len(t, s.Profile.Stuck(), 2)
	// PROFSHA covers the CSV files.
	store(t, dir, "stuck.csv", []byte("column,row,state\n12,3,off\n100,40,off\n"))
	requireRefused(t, dir, "the profile is not the one")
	remove(t, dir, "stuck.csv")
	_, err = sequence.Read(context.Background(), dir)
	require.ErrorContains(t, err, "stuck.csv")
}

func TestWriteRefusesFoldersInUse(t *testing.T) {
	target, profile := small(t, instrument.Square)
	s := build(t, target, profile)
	dir := write(t, s)
	require.ErrorContains(t, s.Write(context.Background(), dir), "the folder holds sequence.fits already; write the sequence into an empty folder")
	remove(t, dir, "sequence.fits")
	require.ErrorContains(t, s.Write(context.Background(), dir), "the folder holds masks already")
	// An existing folder with other files is fine.
	other := t.TempDir()
	store(t, other, "notes.txt", []byte("clouds"))
	require.NoError(t, s.Write(context.Background(), other))
	require.Equal(t, "clouds", contents(t, other)["notes.txt"])
}

func TestWriteRefusesWhatReadWouldRefuse(t *testing.T) {
	target, profile := small(t, instrument.Diagonal)
	whole := build(t, target, profile)
	write(t, whole) // fills in the digests
	for _, c := range edits {
		if c.name == "no mask" { // which Write fills in
			continue
		}
		s := clone(whole)
		c.edit(s)
		dir := filepath.Join(t.TempDir(), "sequence")
		require.Error(t, s.Write(context.Background(), dir), c.name)
		require.NoFileExists(t, filepath.Join(dir, "sequence.fits"), c.name)
	}
}

func TestWriteStopsWhenCancelled(t *testing.T) {
	target, profile := small(t, instrument.Square)
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	dir := filepath.Join(t.TempDir(), "sequence")
	require.ErrorIs(t, build(t, target, profile).Write(ctx, dir), context.Canceled)
	require.NoFileExists(t, filepath.Join(dir, "sequence.fits"))

	written := write(t, build(t, target, profile))
	_, err := sequence.Read(ctx, written)
	require.ErrorIs(t, err, context.Canceled)
}

func TestWriteNamesAFolderThatCannotBe(t *testing.T) {
	target, profile := small(t, instrument.Square)
	file := filepath.Join(t.TempDir(), "file")
	require.NoError(t, os.WriteFile(file, nil, 0o644))
	err := build(t, target, profile).Write(context.Background(), filepath.Join(file, "sequence"))
	require.ErrorContains(t, err, file)
}
