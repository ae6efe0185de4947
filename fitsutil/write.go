package fitsutil

import (
	"fmt"
	"strings"
)

// ImageData is an image to be written whole.
//
// Data is a slice of Axes[0] * Axes[1] * ... samples, the first axis running
// fastest: []uint8, []int16, []uint16 (stored with BZERO = 32768), []int32,
// []int64, []float32 or []float64.
//
// Header holds further cards and may be nil. Cards that describe the structure
// or the scaling (SIMPLE, BITPIX, NAXISn, BSCALE, BZERO, CHECKSUM ...) are left
// out, so a header that was read can be given as it is.
type ImageData struct {
	Name   string // EXTNAME; empty writes none
	Header *Header
	Axes   []int
	Data   any
}

// WriteFile writes a FITS file: a primary HDU, then hdus, each an *ImageData or
// a *Table. If primary is nil and the first of hdus is an *ImageData without a
// name, that image is the primary array; otherwise the primary HDU has no
// pixels and the cards of primary, which may be nil.
//
// Every HDU gets CHECKSUM and DATASUM. The same arguments give the same bytes.
// The file appears under its name complete or not at all (see WriteAtomic); its
// room is reserved at the start. Errors are an *Error: ErrStructure for axes,
// names or columns that do not fit together, ErrType for data of another type,
// ErrBadCard for cards that cannot be written, ErrNoRoom for a full disk.
func WriteFile(path string, primary *Header, hdus ...any) error {
	return inFile(path, writeFile(path, primary, hdus))
}

func writeFile(path string, primary *Header, hdus []any) error {
	images, tables, err := sortHDUs(path, hdus)
	if err != nil {
		return err
	}
	out, err := createLayout(path)
	if err != nil {
		return err
	}
	defer out.part.abort()
	var fill []func() error // writes the data of an HDU
	if primary != nil || len(hdus) == 0 || images[0] == nil || images[0].Name != "" {
		if err := addEmptyPrimary(out, primary); err != nil {
			return err
		}
	}
	for i := range hdus {
		var write func() error
		if images[i] != nil {
			write, err = addImageData(out, images[i])
		} else {
			write, err = addTable(out, tables[i])
		}
		if err != nil {
			return err
		}
		fill = append(fill, write)
	}
	if err := out.reserve(0); err != nil {
		return out.part.wrap(err, "cannot be written")
	}
	for _, write := range fill {
		if err := write(); err != nil {
			return out.part.wrap(err, "cannot be written")
		}
	}
	return out.part.wrap(out.finish(), "cannot be written")
}

// sortHDUs tells images from tables: at every index one of the two is set.
func sortHDUs(path string, hdus []any) (images []*ImageData, tables []*Table, err error) {
	images, tables = make([]*ImageData, len(hdus)), make([]*Table, len(hdus))
	names := make([]string, len(hdus))
	for i, hdu := range hdus {
		switch h := hdu.(type) {
		case *ImageData:
			if images[i] = h; h != nil {
				names[i] = h.Name
			}
		case *Table:
			if tables[i] = h; h != nil {
				names[i] = h.Name
			}
		}
		if images[i] == nil && tables[i] == nil {
			return nil, nil, fileError(path, ErrType, fmt.Sprintf("HDU %d of those to write is a %T", i, hdu), "give an *ImageData or a *Table")
		}
	}
	return images, tables, checkNames(path, names)
}

// addEmptyPrimary starts a file with a primary HDU without pixels.
func addEmptyPrimary(out *layout, extra *Header) error {
	header, _, err := imageHeader(imageShape{bitpix: 8, primary: true}, extra)
	if err != nil {
		return err
	}
	_, err = out.add(header, 0)
	return err
}

// addImageData places an image and returns what writes its samples.
func addImageData(out *layout, image *ImageData) (write func() error, err error) {
	kind, count, ok := sampleTypeOf(image.Data)
	if !ok {
		return nil, writeFault(ErrType, image.Name, fmt.Sprintf("its data are %T", image.Data), "give a slice of uint8, int16, uint16, int32, int64, float32 or float64")
	}
	shape := imageShape{name: image.Name, bitpix: kind.bitpix, unsigned: kind.unsigned, axes: image.Axes, primary: len(out.hdus) == 0}
	header, samples, err := imageHeader(shape, image.Header)
	if err != nil {
		return nil, err
	}
	if samples != int64(count) {
		return nil, writeFault(ErrStructure, image.Name, fmt.Sprintf("its axes %v need %d samples, not %d", image.Axes, samples, count), "")
	}
	hdu, err := out.add(header, samples*int64(kind.size()))
	if err != nil {
		return nil, err
	}
	return func() error { return out.writeSamples(hdu, kind, 0, image.Data, 0, count) }, nil
}

// imageShape is what the structure cards of an image say.
type imageShape struct {
	name     string
	bitpix   int
	unsigned bool
	axes     []int
	primary  bool
}

// maxDataBytes is beyond any disk and far below what overflows an int64.
const maxDataBytes = int64(1) << 56

// maxAxes is the largest NAXIS (section 4.4.1.1).
const maxAxes = 999

// samples is the number of samples of the shape; axes must be at least 1.
func (s imageShape) samples() (int64, error) {
	if len(s.axes) == 0 {
		return 0, nil
	}
	total := int64(1)
	for _, n := range s.axes {
		if n < 1 {
			return 0, writeFault(ErrStructure, s.name, fmt.Sprintf("its axes are %v", s.axes), "make every axis at least 1 long")
		}
		if total > maxDataBytes/8/int64(n) {
			return 0, writeFault(ErrTooLarge, s.name, fmt.Sprintf("its axes are %v", s.axes), "write a smaller image")
		}
		total *= int64(n)
	}
	if len(s.axes) > maxAxes {
		return 0, writeFault(ErrStructure, s.name, fmt.Sprintf("it has %d axes", len(s.axes)), "")
	}
	return total, nil
}

// imageHeader makes the whole header of an image, with placeholders for the
// sums, and counts its samples.
func imageHeader(s imageShape, extra *Header) (*Header, int64, error) {
	samples, err := s.samples()
	if err != nil {
		return nil, 0, err
	}
	first := Card{"SIMPLE", true, "conforms to FITS standard"}
	if !s.primary {
		first = Card{"XTENSION", "IMAGE", "image extension"}
	}
	h := NewHeader(first,
		Card{"BITPIX", s.bitpix, "array data type"},
		Card{"NAXIS", len(s.axes), "number of array dimensions"})
	set := func(key string, value any) {
		if err == nil {
			err = h.Set(key, value, "")
		}
	}
	for i, n := range s.axes {
		set(fmt.Sprintf("NAXIS%d", i+1), n)
	}
	if s.primary {
		set("EXTEND", true)
	} else {
		set("PCOUNT", 0)
		set("GCOUNT", 1)
	}
	if s.name != "" {
		set("EXTNAME", s.name)
	}
	if s.unsigned {
		set("BSCALE", 1)
		set("BZERO", 1<<15)
	}
	if err != nil {
		return nil, 0, err
	}
	if err := addExtra(h, extra, s.keeps); err != nil {
		return nil, 0, err
	}
	addSumCards(h)
	return h, samples, nil
}

// keeps tells which of the caller's cards an image takes over. BLANK belongs
// to integers only (section 4.4.2.5).
func (s imageShape) keeps(key string) bool {
	switch key {
	case "EXTNAME":
		return s.name == ""
	case "BLANK":
		return s.bitpix > 0 && len(s.axes) > 0
	}
	return !structural(key)
}

// writeFault is a fault of an HDU to be written; the file's name is added by
// inFile.
func writeFault(sentinel error, name, what, cure string) error {
	if name == "" {
		name = "without name"
	}
	return fileError("", sentinel, "HDU "+strings.TrimSpace(name)+": "+what, cure)
}
