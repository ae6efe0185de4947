package hadamard

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// TestAssemblyIsGenerated: the generator makes the assembly and its
// declarations as they are here, byte for byte, and no others are here.
func TestAssemblyIsGenerated(t *testing.T) {
	dir := t.TempDir()
	outside.Generator(t, "hadamard/internal/gen", "-o", dir)
	made, err := os.ReadDir(dir)
	require.NoError(t, err)
	require.NotEmpty(t, made)
	var names []string
	for _, file := range made {
		names = append(names, file.Name())
		want, err := os.ReadFile(filepath.Join(dir, file.Name()))
		require.NoError(t, err)
		got, err := os.ReadFile(file.Name())
		require.NoError(t, err)
		require.True(t, string(want) == string(got), "%s is not what the generator makes: go generate ./hadamard", file.Name())
	}
	assembly, err := filepath.Glob("*.s")
	require.NoError(t, err)
	require.Subset(t, names, assembly)
}
