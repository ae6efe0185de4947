package fitsutil

import (
	"os"
	"sync"
)

// File is an open FITS file: its headers in memory, its data on disk.
type File struct {
	path string // as the caller named it, for errors
	data string // the file that is read: path, or the scratch file of an unpacked one
	size int64
	hdus []*HDU

	mu     sync.RWMutex // guards fd and closed
	fd     *os.File     // nil while released
	closed bool
}

// HDUs gives the HDUs in file order.
func (f *File) HDUs() []*HDU { return f.hdus }
