//go:build !linux

package fitsutil

import "os"

// syncData brings a file's bytes to the disk.
func syncData(f *os.File) error { return f.Sync() }
