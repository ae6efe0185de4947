package fitsutil

import (
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"
)

// smallDisk gives a folder on a disk of 1 MiB. Who may not mount one skips, but
// fails under CI=true; TestFullDeviceNamesCure meets a real ENOSPC anyway.
func smallDisk(t *testing.T) string {
	t.Helper()
	folder := t.TempDir()
	if err := mountSmallDisk(folder); err != nil {
		if os.Getenv("CI") == "true" {
			t.Fatalf("a disk of 1 MiB cannot be mounted: %v", err)
		}
		t.Skipf("a disk of 1 MiB cannot be mounted: %v", err)
	}
	t.Cleanup(func() { require.NoError(t, syscall.Unmount(folder, 0)) })
	return folder
}

func requireNoRoom(t *testing.T, err error, path string) {
	t.Helper()
	requireCure(t, err, path, ErrNoRoom)
	require.ErrorIs(t, err, syscall.ENOSPC)
	require.NotContains(t, err.Error(), ".part", "the temporary name says nothing to the user")
}

func TestDiskFull(t *testing.T) {
	folder := smallDisk(t)
	path := filepath.Join(folder, "product.fits")
	require.NoError(t, os.WriteFile(path, []byte("old"), 0o644))
	const tooMuch = 1 << 20 // float32: 4 MiB
	attempts := map[string]func() error{
		"WriteAtomic": func() error {
			return WriteAtomic(path, writeText(strings.Repeat("x", 2<<20)))
		},
		"WriteFile": func() error {
			return WriteFile(path, nil, &ImageData{Axes: []int{tooMuch}, Data: make([]float32, tooMuch)})
		},
		"CreateCube": func() error { // at the start, before a sample exists
			cube, err := CreateCube(path, nil, []ImageSpec{{BITPIX: -32, Axes: []int{1024, 1024}}})
			require.Nil(t, cube)
			return err
		},
		"AppendTable": func() error {
			cube, err := CreateCube(path, nil, nil)
			require.NoError(t, err)
			err = cube.AppendTable(&Table{Name: "T", Columns: []Column{{Name: "A", Format: "E", Data: make([]float32, tooMuch)}}})
			require.Equal(t, err, cube.Commit(), "a failed cube cannot be committed")
			return err
		},
	}
	for name, attempt := range attempts {
		t.Run(name, func(t *testing.T) {
			requireNoRoom(t, attempt(), path)
			onlyFile(t, path, "old")
		})
	}
}

// A failing disk in the middle of a strip: the cube says so at once and cannot
// be committed. The descriptor is closed behind its back.
func TestFailedWriteSpoilsCube(t *testing.T) {
	path := filepath.Join(t.TempDir(), "cube.fits")
	require.NoError(t, os.WriteFile(path, []byte("old"), 0o644))
	cube, err := CreateCube(path, nil, []ImageSpec{{BITPIX: 16, Axes: []int{4, 4}}})
	require.NoError(t, err)
	require.NoError(t, cube.out.part.file.Close())
	err = cube.WriteStrip(0, 0, 4, 0, 1, make([]int16, 16))
	require.ErrorIs(t, err, os.ErrClosed)
	var typed *Error
	require.ErrorAs(t, err, &typed)
	require.Equal(t, path, typed.File)
	require.Equal(t, err, cube.Commit())
	onlyFile(t, path, "old")
}

// /dev/full fails every write with ENOSPC: the seam that needs no mount.
func TestFullDeviceNamesCure(t *testing.T) {
	device, err := os.OpenFile("/dev/full", os.O_WRONLY, 0)
	if errors.Is(err, os.ErrNotExist) && os.Getenv("CI") != "true" {
		t.Skip("no /dev/full on this system")
	}
	require.NoError(t, err)
	defer device.Close()
	path := filepath.Join(t.TempDir(), "x.txt")
	err = WriteAtomic(path, func(io.Writer) error {
		_, err := device.Write([]byte("x"))
		return err
	})
	requireNoRoom(t, err, path)
	_, err = os.Stat(path)
	require.ErrorIs(t, err, os.ErrNotExist)
}
