package fitsutil

// Kind is the type of an HDU.
type Kind string

// The kinds of HDU (Standard 7). Other holds registered and foreign extensions, which are
// skipped by their size, and random groups.
const (
	ImageHDU    Kind = "IMAGE"
	BinTableHDU Kind = "BINTABLE"
	TextTable   Kind = "TABLE"
	Other       Kind = "other"
)

// HDU is a header and the place of its data. Its fields are not to be changed.
type HDU struct {
	Index  int    // 0 = primary
	Name   string // EXTNAME, or empty
	Kind   Kind
	Header *Header
	BITPIX int   // 8, 16, 32, 64, -32 or -64
	Axes   []int // NAXIS1, NAXIS2, ... (nil for NAXIS = 0)

	headerOffset int64 // of the first card
	dataOffset   int64
	dataSize     int64 // without the fill of the last block
}

// HasPixels tells whether the HDU is an image with at least one pixel.
func (u *HDU) HasPixels() bool {
	return u.Kind == ImageHDU && len(u.Axes) > 0 && u.dataSize > 0
}
