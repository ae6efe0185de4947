package fitsutil

import "syscall"

// mountSmallDisk mounts a file system of 1 MiB in memory, which root may.
func mountSmallDisk(folder string) error {
	return syscall.Mount("tmpfs", folder, "tmpfs", 0, "size=1m")
}
