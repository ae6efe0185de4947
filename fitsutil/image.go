package fitsutil

// Image reads the pixels of one HDU by offset. Its exported fields are not to be changed.
type Image struct {
	Header *Header
	Name   string // EXTNAME, or empty
	HDU    int    // index of the HDU
	BITPIX int
	Axes   []int // FITS order

	file   *File
	offset int64 // of the first pixel
}
