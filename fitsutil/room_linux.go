package fitsutil

import (
	"math"

	"golang.org/x/sys/unix"
)

// freeBytes tells how much an ordinary user may still write in a folder.
func freeBytes(dir string) (int64, bool) {
	var s unix.Statfs_t
	if err := unix.Statfs(dir, &s); err != nil || s.Bsize <= 0 {
		return 0, false
	}
	if s.Bavail > math.MaxInt64/uint64(s.Bsize) {
		return math.MaxInt64, true
	}
	return int64(s.Bavail) * int64(s.Bsize), true
}
