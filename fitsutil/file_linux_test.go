package fitsutil

import (
	"os"
	"path/filepath"
	"runtime"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"
	"golang.org/x/sys/unix"
)

// Root reads everything, so the thread of this test gives up root's rights over files: Linux
// keeps the file-system identity by thread.
func TestOpenWithoutPermission(t *testing.T) {
	dir, err := os.MkdirTemp("", "permission") // t.TempDir lies in a folder closed to others
	require.NoError(t, err)
	t.Cleanup(func() { require.NoError(t, os.RemoveAll(dir)) })
	require.NoError(t, os.Chmod(dir, 0o755))
	path := filepath.Join(dir, "locked.fits")
	require.NoError(t, os.WriteFile(path, headerBytes(primary(8)...), 0o644))
	require.NoError(t, os.Chmod(path, 0o644))

	if os.Getuid() == 0 {
		const nobody = 65534
		runtime.LockOSThread()
		defer runtime.UnlockOSThread()
		require.NoError(t, unix.Setfsuid(nobody))
		defer func() { require.NoError(t, unix.Setfsuid(0)) }()
	}
	f, err := Open(path) // the control: with the right to read there is no error
	require.NoError(t, err)
	require.NoError(t, f.Close())

	chmod := make(chan error)
	go func() { chmod <- os.Chmod(path, 0) }() // by another thread, as the owner
	require.NoError(t, <-chmod)
	f, err = Open(path)
	require.Nil(t, f)
	e := requireError(t, err, os.ErrPermission, path, "permission denied")
	require.Contains(t, e.Cure, "chmod")
}

// Released files hold no descriptor: 200 of them are open while the process may have 40 more
// descriptors than it has.
func TestReleaseUnderFewDescriptors(t *testing.T) {
	const files, spare = 200, 40
	path := writeTemp(t, "one.fits", join(headerBytes(primary(16, 2)...), dataBytes([]int16{7, -8})))
	open, err := os.ReadDir("/proc/self/fd")
	require.NoError(t, err)
	var limit syscall.Rlimit
	require.NoError(t, syscall.Getrlimit(syscall.RLIMIT_NOFILE, &limit))
	low := limit
	low.Cur = uint64(len(open) + spare)
	require.NoError(t, syscall.Setrlimit(syscall.RLIMIT_NOFILE, &low))
	t.Cleanup(func() { require.NoError(t, syscall.Setrlimit(syscall.RLIMIT_NOFILE, &limit)) })

	var held []*File
	for range files {
		f, err := Open(path)
		require.NoError(t, err)
		require.NoError(t, f.Release())
		held = append(held, f)
	}
	for _, f := range held {
		im, err := f.FirstImage()
		require.NoError(t, err)
		got := make([]float32, 2)
		require.NoError(t, im.ReadRows(got, 0, 1))
		require.Equal(t, []float32{7, -8}, got)
		require.NoError(t, f.Release())
	}
	// The limit did bite.
	var busy []*File
	for err == nil && len(busy) <= 2*spare {
		var f *File
		if f, err = Open(path); err == nil {
			busy = append(busy, f)
		}
	}
	requireError(t, err, syscall.EMFILE, "too many open files", "ulimit -n")
	for _, f := range append(held, busy...) {
		require.NoError(t, f.Close())
	}
}

func TestGzipWithoutRoom(t *testing.T) {
	content := join(headerBytes(primary(8, 2<<20)...), make([]byte, 2<<20), make([]byte, padding(2<<20)))
	path := writeTemp(t, "zeros.fits.gz", packed(t, content))
	check := func(u unpacker, text string) {
		t.Helper()
		f, err := u.openFile(path)
		require.Nil(t, f)
		e := requireError(t, err, ErrNoRoom, path, text)
		require.Contains(t, e.Cure, "scratch")
	}
	// By the seam: 100 bytes free.
	folder := t.TempDir()
	check(unpacker{dir: folder, free: func(string) (int64, bool) { return 100, true }}, "room for 100")
	requireEmpty(t, folder)
	// A disk that fills up while it is written: /dev/full always is.
	full, err := os.OpenFile("/dev/full", os.O_WRONLY, 0)
	require.NoError(t, err)
	defer full.Close()
	f, err := (&diskFile{path: path, name: path}).open()
	require.NoError(t, err)
	info, err := os.Stat(path)
	require.NoError(t, err)
	err = unpacker{dir: "/dev"}.inflate(full, &File{path: path, size: info.Size(), fd: f})
	requireError(t, err, ErrNoRoom, path, "no room to unpack")
	require.ErrorIs(t, err, syscall.ENOSPC)

	tiny := t.TempDir()
	if err := mountSmallDisk(tiny); err != nil {
		t.Logf("no small disk can be mounted here (%v): the seams above were tested", err)
		return
	}
	t.Cleanup(func() { require.NoError(t, unix.Unmount(tiny, 0)) })
	check(unpacker{dir: tiny, free: freeBytes}, "has room for 1048576")
	requireEmpty(t, tiny)
	check(unpacker{dir: tiny, free: func(string) (int64, bool) { return 0, false }}, "no room to unpack")
	requireEmpty(t, tiny)
}
