package fitsutil

import (
	"fmt"
	"math"
	"strings"
)

// Image reads the pixels of one HDU by offset. Its exported fields are not to be changed.
//
// All readers give physical values as float32: a stored value is multiplied by BSCALE and
// BZERO added in float64, then rounded once (64-bit integers: to float64 first, if they are
// scaled). Stored values equal to BLANK (integers only) become NaN; floats beyond float32
// become infinite. Bad arguments are *Error with ErrRange and leave dst as it was.
type Image struct {
	Header *Header
	Name   string // EXTNAME, or empty
	HDU    int    // index of the HDU
	BITPIX int
	Axes   []int // FITS order

	file   *File
	offset int64 // of the first pixel
	sample int64 // bytes a pixel
	scale  scaling
}

// Image gives the image of an HDU index. Errors: ErrMissingHDU, ErrType (no image, or one
// without pixels), ErrCompressed, ErrBadCard and ErrType for BZERO, BSCALE and BLANK.
func (f *File) Image(index int) (*Image, error) {
	if index < 0 || index >= len(f.hdus) {
		return nil, fileError(f.path, ErrMissingHDU,
			fmt.Sprintf("there is no HDU %d: the file has %d", index, len(f.hdus)), "")
	}
	return f.image(f.hdus[index])
}

// ImageNamed gives the image of an EXTNAME (the first of several; upper and lower case are the
// same). Errors as for Image.
func (f *File) ImageNamed(name string) (*Image, error) {
	for _, u := range f.hdus {
		if strings.EqualFold(u.Name, name) {
			return f.image(u)
		}
	}
	return nil, fileError(f.path, ErrMissingHDU, fmt.Sprintf("there is no HDU with EXTNAME %q", name), "")
}

// FirstImage gives the first HDU with pixels, primary or extension. Errors: ErrMissingHDU where
// there is none, ErrCompressed where the first is compressed, and those of Image.
func (f *File) FirstImage() (*Image, error) {
	for _, u := range f.hdus {
		if u.HasPixels() || u.compressed() {
			return f.image(u)
		}
	}
	return nil, fileError(f.path, ErrMissingHDU, "no HDU holds pixels", "give a file with an image")
}

// compressed tells whether the HDU is a tile-compressed image (Standard 10.1).
func (u *HDU) compressed() bool {
	if u.Kind != BinTableHDU || !u.Header.Has("ZIMAGE") {
		return false
	}
	z, _ := u.Header.Bool("ZIMAGE")
	return z
}

func (f *File) image(u *HDU) (*Image, error) {
	fail := func(sentinel error, what, cure string) (*Image, error) {
		return nil, &Error{File: f.path, HDU: u.Index, Offset: u.headerOffset, What: what, Cure: cure, Err: sentinel}
	}
	switch {
	case u.compressed():
		return fail(ErrCompressed, "the image is tile-compressed", "unpack it first, for example with funpack")
	case u.Kind != ImageHDU:
		return fail(ErrType, fmt.Sprintf("the HDU is of type %s, not an image", u.Kind), "")
	case !u.HasPixels():
		return fail(ErrType, "the HDU has no pixels", "")
	}
	im := &Image{Header: u.Header, Name: u.Name, HDU: u.Index, BITPIX: u.BITPIX, Axes: u.Axes,
		file: f, offset: u.dataOffset, sample: int64(max(u.BITPIX, -u.BITPIX) / 8)}
	var err error
	if im.scale, err = readScaling(u); err != nil {
		return nil, err
	}
	return im, nil
}

// Width is NAXIS1, Height NAXIS2 (1 for one axis), Planes the product of the higher axes.
func (im *Image) Width() int { return im.Axes[0] }

// Height is NAXIS2, or 1 for an image of one axis.
func (im *Image) Height() int {
	if len(im.Axes) < 2 {
		return 1
	}
	return im.Axes[1]
}

// Planes is the product of the axes above the second, 1 if there are none.
func (im *Image) Planes() int {
	n := 1
	for _, a := range im.Axes[min(2, len(im.Axes)):] {
		n *= a
	}
	return n
}

// ReadRows reads rows y0 to y1-1 of the first plane; len(dst) = (y1-y0) Width.
func (im *Image) ReadRows(dst []float32, y0, y1 int) error {
	return im.ReadPlaneRows(dst, 0, y0, y1)
}

// ReadPlaneRows reads rows y0 to y1-1 of a plane; len(dst) = (y1-y0) Width.
func (im *Image) ReadPlaneRows(dst []float32, plane, y0, y1 int) error {
	if plane < 0 || plane >= im.Planes() {
		return im.rangeError("there is no plane %d: the image has %d", plane, im.Planes())
	}
	if err := im.check(len(dst), 0, im.Width(), y0, y1); err != nil {
		return err
	}
	row := int64(im.Width())
	return im.readRun(dst, (int64(plane)*int64(im.Height())+int64(y0))*row)
}

// ReadSection reads columns x0 to x1-1 of rows y0 to y1-1 of the first plane, such as the
// data or the overscan of one of several amplifiers; len(dst) = (x1-x0)(y1-y0), row by row.
func (im *Image) ReadSection(dst []float32, x0, x1, y0, y1 int) error {
	if err := im.check(len(dst), x0, x1, y0, y1); err != nil {
		return err
	}
	row, n := im.Width(), x1-x0
	if n == row || n == 0 {
		return im.readRun(dst, int64(y0)*int64(row))
	}
	together := im.rowsTogether(n)
	for y := y0; y < y1; y += together {
		h := min(together, y1-y)
		part := dst[(y-y0)*n : (y-y0+h)*n]
		first := int64(y)*int64(row) + int64(x0)
		if h == 1 {
			if err := im.readRun(part, first); err != nil {
				return err
			}
			continue
		}
		if err := im.readStrided(part, first, n, h); err != nil {
			return err
		}
	}
	return nil
}

// rowsTogether is how many rows of a section of n columns are read in one piece, gaps
// included: as many as the buffer holds, unless the gaps are most of what is read.
func (im *Image) rowsTogether(n int) int {
	const mostlyGaps = 4 // a system call costs about as much as the copying of 4 KiB
	rowBytes, bytes := int64(im.Width())*im.sample, int64(n)*im.sample
	if rowBytes > mostlyGaps*bytes && rowBytes-bytes > 4096 {
		return 1
	}
	return int(max(1, (chunkBytes-bytes)/rowBytes+1))
}

// readStrided reads h rows of n pixels, each a row of the image behind the one before, which
// fit the buffer together.
func (im *Image) readStrided(dst []float32, first int64, n, h int) error {
	buffer := getBuffer()
	defer putBuffer(buffer)
	rowBytes := im.Width() * int(im.sample)
	raw := (*buffer)[:(h-1)*rowBytes+n*int(im.sample)]
	if err := im.readBytes(raw, first); err != nil {
		return err
	}
	for i := range h {
		im.scale.convert(dst[i*n:(i+1)*n], raw[i*rowBytes:])
	}
	return nil
}

// readRun reads pixels that follow one another, from a pixel index on.
func (im *Image) readRun(dst []float32, first int64) error {
	buffer := getBuffer()
	defer putBuffer(buffer)
	most := chunkBytes / int(im.sample)
	for len(dst) > 0 {
		n := min(len(dst), most)
		raw := (*buffer)[:n*int(im.sample)]
		if err := im.readBytes(raw, first); err != nil {
			return err
		}
		im.scale.convert(dst[:n], raw)
		dst, first = dst[n:], first+int64(n)
	}
	return nil
}

func (im *Image) readBytes(raw []byte, first int64) error {
	return im.file.readAt(raw, im.offset+first*im.sample)
}

func (im *Image) check(have, x0, x1, y0, y1 int) error {
	switch {
	case y0 < 0 || y1 < y0 || y1 > im.Height():
		return im.rangeError("there are no rows %d to %d: the image has %d", y0, y1, im.Height())
	case x0 < 0 || x1 < x0 || x1 > im.Width():
		return im.rangeError("there are no columns %d to %d: the image has %d", x0, x1, im.Width())
	case x1 > x0 && (y1-y0) > math.MaxInt/(x1-x0) || have != (x1-x0)*(y1-y0):
		return im.rangeError("the buffer holds %d pixels, not %d rows of %d", have, y1-y0, x1-x0)
	}
	return nil
}

func (im *Image) rangeError(format string, args ...any) error {
	return &Error{File: im.file.path, HDU: im.HDU, Offset: none, What: fmt.Sprintf(format, args...), Err: ErrRange}
}
