package fitsutil

import (
	"errors"
	"os"

	"golang.org/x/sys/unix"
)

// preallocate reserves the blocks of the bytes [from, to) of f, so that a full
// disk shows before the work and not at its end. Where the file system cannot
// reserve (NFS, some network and overlay ones), the free room is compared once
// and the file only lengthened.
func preallocate(f *os.File, from, to int64) error {
	if to <= from {
		return nil
	}
	for {
		err := unix.Fallocate(int(f.Fd()), 0, from, to-from)
		switch {
		case err == nil:
			return nil
		case errors.Is(err, unix.EINTR):
			continue
		case errors.Is(err, unix.EOPNOTSUPP), errors.Is(err, unix.ENOSYS), errors.Is(err, unix.EINVAL):
			return lengthen(f, from, to)
		default:
			return &os.PathError{Op: "fallocate", Path: f.Name(), Err: err}
		}
	}
}

// lengthen is preallocate without the reservation.
func lengthen(f *os.File, from, to int64) error {
	var stat unix.Statfs_t
	if err := unix.Fstatfs(int(f.Fd()), &stat); err == nil && stat.Blocks > 0 {
		// Blocks 0 means that the file system does not tell its size.
		if free := stat.Bavail * uint64(stat.Bsize); free < uint64(to-from) {
			return &os.PathError{Op: "preallocate", Path: f.Name(), Err: unix.ENOSPC}
		}
	}
	return f.Truncate(to)
}
