package fitsutil

import (
	"errors"
	"os"

	"golang.org/x/sys/unix"
)

// syncData brings a file's bytes to the disk, without the times of its inode.
func syncData(f *os.File) error {
	for {
		err := unix.Fdatasync(int(f.Fd()))
		if !errors.Is(err, unix.EINTR) {
			return err
		}
	}
}
