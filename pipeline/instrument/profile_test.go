package instrument

import (
	"crypto/sha256"
	"encoding/hex"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/config"
)

func TestNames(t *testing.T) {
	require.Subset(t, Names(), []string{"infrared", "optical"})
	for _, name := range Names() {
		p, err := Load(name)
		require.NoError(t, err)
		require.Equal(t, name, p.Name, "an embedded profile is called what its file is")
	}
}

// TestRoundTrip: the resolved text, with the files it names beside it, is the
// same profile, and resolving it again changes nothing.
func TestRoundTrip(t *testing.T) {
	profiles := map[string]*Profile{}
	for _, name := range Names() {
		p, err := Load(name)
		require.NoError(t, err)
		profiles[name] = p
	}
	p, err := parsePlain(plain)
	require.NoError(t, err)
	profiles["plain"] = p
	for name, p := range profiles {
		text, err := p.YAML()
		require.NoError(t, err)
		dir := t.TempDir()
		path := filepath.Join(dir, "profile.yaml")
		require.NoError(t, os.WriteFile(path, text, 0o644))
		for file, data := range p.Files() {
			require.NoError(t, os.WriteFile(filepath.Join(dir, file), data, 0o644))
		}
		back, err := Load(path)
		require.NoError(t, err, name)
		require.Equal(t, p, back, name)
		again, err := back.YAML()
		require.NoError(t, err)
		require.Equal(t, string(text), string(again), name)
		require.Equal(t, p.SHA(), back.SHA(), name)
	}
}

func TestSHA(t *testing.T) {
	p, err := Load("optical")
	require.NoError(t, err)
	text, err := p.YAML()
	require.NoError(t, err)
	sum := sha256.Sum256(text)
	require.Equal(t, hex.EncodeToString(sum[:]), p.SHA())

	one, err := parsePlain(plain)
	require.NoError(t, err)
	other, err := Parse("p.yaml", []byte(plain), besideStuck(strings.Replace(plainStuck, ",on\n", ",off\n", 1)))
	require.NoError(t, err)
	require.NotEqual(t, one.SHA(), other.SHA(), "other stuck mirrors make another profile")
}

// TestFilesAreCopies: a caller that changes the map does not change the profile.
func TestFilesAreCopies(t *testing.T) {
	p, err := parsePlain(plain)
	require.NoError(t, err)
	before := p.SHA()
	files := p.Files()
	clear(files)
	require.Equal(t, []string{"stuck.csv"}, collect(p.Files()))
	require.Equal(t, before, p.SHA())
}

func collect(files map[string][]byte) []string {
	var names []string
	for name := range maps.Keys(files) {
		names = append(names, name)
	}
	return names
}

func TestLoadRefuses(t *testing.T) {
	_, err := Load("nosuch")
	require.ErrorIs(t, err, fs.ErrNotExist)
	require.Contains(t, err.Error(), "nosuch: file does not exist; give a file or one of the embedded profiles: infrared, optical")

	dir := t.TempDir()
	path := filepath.Join(dir, "p.yaml")
	require.NoError(t, os.WriteFile(path, []byte(plain), 0o644))
	_, err = Load(path)
	require.EqualError(t, err, path+":23: dmd.stuck_csv: there is no file stuck.csv beside "+path+"; put it there: file does not exist")
	var refusal *config.Error
	require.ErrorAs(t, err, &refusal)
	require.ErrorIs(t, err, fs.ErrNotExist)

	require.NoError(t, os.WriteFile(path, []byte(strings.Replace(plain, "pitch_um", "pitch", 1)), 0o644))
	_, err = Load(path)
	require.EqualError(t, err, path+":15: dmd.pitch: unknown key; write pitch_um")
}
