package fitsutil

import (
	"os"
	"path/filepath"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"
)

// Where room cannot be reserved, free room is compared and the file lengthened.
func TestLengthenInsteadOfReserving(t *testing.T) {
	file, err := os.Create(filepath.Join(t.TempDir(), "f"))
	require.NoError(t, err)
	defer file.Close()
	require.NoError(t, lengthen(file, 0, 12345))
	info, err := file.Stat()
	require.NoError(t, err)
	require.EqualValues(t, 12345, info.Size())
	require.ErrorIs(t, lengthen(file, 0, 1<<60), syscall.ENOSPC)
}
