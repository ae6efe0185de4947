package main

import (
	"fmt"
	"io"
	"os"
	"path/filepath"
	"syscall"
	"unsafe"

	"golang.org/x/sys/unix"
)

// framesOf lists the frames of a night in the order of their names, and their bytes.
func framesOf(n night) (paths []string, bytes int64, err error) {
	if paths, err = filepath.Glob(filepath.Join(n.frames, "*.fits")); err != nil {
		return nil, 0, err
	}
	for _, path := range paths {
		info, err := os.Stat(path)
		if err != nil {
			return nil, 0, err
		}
		bytes += info.Size()
	}
	return paths, bytes, nil
}

// warm reads files, so that they are in the page cache.
func warm(paths []string) error {
	for _, path := range paths {
		if err := eachFile(path, func(f *os.File) error {
			_, err := io.Copy(io.Discard, f)
			return err
		}); err != nil {
			return err
		}
	}
	return nil
}

// cool takes files out of the page cache, of this machine at least, and tells which part
// of them stayed there. Other programs' files are left alone.
func cool(paths []string) (left float64, err error) {
	pages, inside := 0, 0
	for _, path := range paths {
		err := eachFile(path, func(f *os.File) error {
			if err := f.Sync(); err != nil { // dirty pages stay
				return err
			}
			if err := unix.Fadvise(int(f.Fd()), 0, 0, unix.FADV_DONTNEED); err != nil {
				return fmt.Errorf("%s: leave the page cache: %w", path, err)
			}
			n, in, err := resident(f)
			pages += n
			inside += in
			return err
		})
		if err != nil {
			return 0, err
		}
	}
	return float64(inside) / float64(max(pages, 1)), nil
}

// resident counts a file's pages and those in the page cache (mincore(2)).
func resident(f *os.File) (pages, inside int, err error) {
	info, err := f.Stat()
	if err != nil || info.Size() == 0 {
		return 0, 0, err
	}
	data, err := unix.Mmap(int(f.Fd()), 0, int(info.Size()), unix.PROT_READ, unix.MAP_SHARED)
	if err != nil {
		return 0, 0, err
	}
	defer unix.Munmap(data) //nolint:errcheck // a mapping of a file that was only looked at
	size := os.Getpagesize()
	there := make([]byte, (len(data)+size-1)/size)
	_, _, errno := syscall.Syscall(unix.SYS_MINCORE, uintptr(unsafe.Pointer(&data[0])), uintptr(len(data)), uintptr(unsafe.Pointer(&there[0])))
	if errno != 0 {
		return 0, 0, fmt.Errorf("%s: mincore: %w", f.Name(), errno)
	}
	for _, page := range there {
		inside += int(page & 1)
	}
	return len(there), inside, nil
}

func eachFile(path string, do func(f *os.File) error) error {
	f, err := os.Open(path)
	if err != nil {
		return err
	}
	defer f.Close() // only read from
	return do(f)
}
