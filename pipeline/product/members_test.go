package product

import (
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
)

func TestMembersRoundTrip(t *testing.T) {
	m := Members{
		{Path: "../night one/run", SHA: "ab12", Element: 3, Row: 0, Frames: 63, Light: 1},
		{Path: "../día\\2", SHA: "cd", Element: 0, Row: 7, Frames: 31, Light: 0.97, LightErr: 0.01},
	}
	path := filepath.Join(t.TempDir(), "a.fits")
	require.NoError(t, fitsutil.WriteFile(path, nil, m.Table()))
	f, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer f.Close() // only read from
	back, err := ReadMembers(f)
	require.NoError(t, err)
	require.Equal(t, m, back)
	require.Len(t, Identify(f), 64)
}

func TestMembersMissing(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a.fits")
	require.NoError(t, fitsutil.WriteFile(path, nil, (Ledger{NewEntry(1)}).Table()))
	f, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer f.Close() // only read from
	m, err := ReadMembers(f)
	require.NoError(t, err)
	require.Nil(t, m)
}
