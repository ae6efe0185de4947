//go:build !linux

package fitsutil

import "errors"

// mountSmallDisk is known for Linux only.
func mountSmallDisk(string) error { return errors.New("no such mount on this system") }
