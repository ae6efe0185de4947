//go:build !linux

package fitsutil

import "os"

// preallocate lengthens f to the byte to. Only Linux has a call that reserves
// the blocks as well.
func preallocate(f *os.File, from, to int64) error {
	if to <= from {
		return nil
	}
	return f.Truncate(to)
}
