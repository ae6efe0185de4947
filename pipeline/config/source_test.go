package config

import (
	"io/fs"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestFind(t *testing.T) {
	s, err := Find("recipes", "default")
	require.NoError(t, err)
	require.Equal(t, "configs/recipes/default.yaml", s.Name)
	d, err := s.Parse()
	require.NoError(t, err)
	require.True(t, d.Has("detector.use"))
	_, err = s.Beside("nothing.csv")
	require.ErrorIs(t, err, fs.ErrNotExist)

	dir := t.TempDir()
	path := filepath.Join(dir, "own.yaml")
	require.NoError(t, os.WriteFile(path, []byte("a: 1\n"), 0o644))
	require.NoError(t, os.WriteFile(filepath.Join(dir, "x.csv"), []byte("x"), 0o644))
	s, err = Find("recipes", path)
	require.NoError(t, err)
	require.Equal(t, path, s.Name)
	data, err := s.Beside("x.csv")
	require.NoError(t, err)
	require.Equal(t, "x", string(data))
	_, err = s.Beside("y.csv")
	require.ErrorIs(t, err, fs.ErrNotExist)
	require.EqualError(t, err, "there is no file y.csv beside "+path+"; put it there: file does not exist")
	_, err = s.Beside("../x.csv")
	require.EqualError(t, err, `"../x.csv" is no bare file name; put the file beside `+path)
}

func TestFindRefuses(t *testing.T) {
	_, err := Find("recipes", "nosuch")
	require.ErrorIs(t, err, fs.ErrNotExist)
	require.Regexp(t, `^nosuch: file does not exist; give a file or one of the embedded recipes: .*default`, err.Error())
	dir := t.TempDir()
	_, err = Find("recipes", dir)
	require.EqualError(t, err, dir+" is a folder; give a YAML file")
	big := filepath.Join(dir, "big")
	require.NoError(t, os.WriteFile(big, make([]byte, maxBytes+1), 0o644))
	_, err = Find("recipes", big)
	require.EqualError(t, err, big+": the file has 1048577 bytes, more than a configuration may have (1048576); give a smaller file")
}

func TestBareName(t *testing.T) {
	for _, good := range []string{"a", "stuck.csv", "A_1-b.csv", "_x"} {
		require.True(t, BareName(good), good)
	}
	for _, bad := range []string{"", ".", "..", ".hidden", "-x", "a/b", `a\b`, "a b", "a\n", "ä", "a:b", string(make([]byte, 200))} {
		require.False(t, BareName(bad), bad)
	}
}
