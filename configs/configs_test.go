package configs

import (
	"io/fs"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestNames(t *testing.T) {
	require.Contains(t, Names(Profiles), "optical")
	require.Contains(t, Names(Profiles), "infrared")
	require.Contains(t, Names(Recipes), "default")
	require.IsIncreasing(t, Names(Profiles))
	require.Subset(t, Names(Recipes), Names(Profiles), "a profile without a recipe of its own")
	require.Empty(t, Names("nothing"))
	require.Empty(t, Names("configs.go"))
	for _, folder := range []string{Profiles, Targets, Scenes, Recipes} {
		for _, name := range Names(folder) {
			data, err := Read(folder, name)
			require.NoError(t, err)
			require.NotEmpty(t, data, "%s/%s", folder, name)
		}
	}
}

func TestReadRefuses(t *testing.T) {
	for _, name := range []string{"nosuch", "../recipes/default", "", `..\x`} {
		_, err := Read(Profiles, name)
		require.ErrorIs(t, err, fs.ErrNotExist, name)
	}
	_, err := ReadFile(Profiles, "nosuch.csv")
	require.EqualError(t, err, "embedded profiles/nosuch.csv: file does not exist")
}
