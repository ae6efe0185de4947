package fitsutil

import (
	"errors"
	"fmt"
	"math"
	"math/bits"
	"slices"
	"strconv"
)

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

// newHDU reads the mandatory cards (Standard 4.4.1). Errors unwrap to ErrNotFITS, ErrStructure
// or ErrTooLarge.
func newHDU(index int, h *Header) (*HDU, error) {
	u := &HDU{Index: index, Header: h}
	var err error
	if u.Kind, err = readKind(index, h); err != nil {
		return nil, err
	}
	bitpix, err := h.mandatory("BITPIX", -64, 64)
	if err != nil {
		return nil, err
	}
	u.BITPIX = int(bitpix)
	switch u.BITPIX {
	case 8, 16, 32, 64, -32, -64:
	default:
		return nil, h.structural("BITPIX", fmt.Sprintf("%d is none of 8, 16, 32, 64, -32, -64", u.BITPIX))
	}
	naxis, err := h.mandatory("NAXIS", 0, 999)
	if err != nil {
		return nil, err
	}
	for i := range int(naxis) {
		n, err := h.mandatory(axisKey(i), 0, math.MaxInt)
		if err != nil {
			return nil, err
		}
		u.Axes = append(u.Axes, int(n))
	}
	if err := u.measure(); err != nil {
		return nil, err
	}
	// A damaged EXTNAME only hides the HDU from those who look for it by name.
	u.Name, _ = h.Str("EXTNAME")
	return u, nil
}

// readKind reads SIMPLE or XTENSION.
func readKind(index int, h *Header) (Kind, error) {
	if index == 0 {
		simple, err := h.Bool("SIMPLE")
		if err != nil || !simple {
			return "", &Error{File: h.file, HDU: index, Card: "SIMPLE", Offset: h.place(0),
				What: "SIMPLE is not T: the file does not follow the FITS Standard",
				Cure: "give a standard FITS file", Err: ErrNotFITS}
		}
		return ImageHDU, nil
	}
	name, err := h.Str("XTENSION")
	if err != nil {
		return "", h.structural("XTENSION", "it does not name a type of extension")
	}
	switch kind := Kind(name); kind {
	case ImageHDU, BinTableHDU, TextTable:
		return kind, nil
	}
	return Other, nil
}

// measure works out the size of the data (Standard 4.4.1.1, 4.4.1.2, 6 for random groups).
func (u *HDU) measure() error {
	h := u.Header
	groups := false
	if u.Index == 0 && len(u.Axes) > 0 && u.Axes[0] == 0 && h.Has("GROUPS") {
		groups, _ = h.Bool("GROUPS")
	}
	pcount, gcount := int64(0), int64(1)
	var err error
	if u.Index > 0 || groups {
		if pcount, err = h.optional("PCOUNT", 0); err != nil {
			return err
		}
		if gcount, err = h.optional("GCOUNT", 1); err != nil {
			return err
		}
	}
	if err := u.checkKind(pcount, gcount); err != nil {
		return err
	}
	first := 0
	if groups {
		u.Kind, first = Other, 1
	}
	return u.multiply(first, pcount, gcount)
}

// checkKind checks what the Standard asks of the known extensions (7.1.1, 7.2.1, 7.3.1).
func (u *HDU) checkKind(pcount, gcount int64) error {
	h := u.Header
	switch u.Kind {
	case ImageHDU:
		if u.Index > 0 && pcount != 0 {
			return h.structural("PCOUNT", "an image extension must have 0")
		}
		if u.Index > 0 && gcount != 1 {
			return h.structural("GCOUNT", "an image extension must have 1")
		}
	case BinTableHDU, TextTable:
		if len(u.Axes) != 2 {
			return h.structural("NAXIS", fmt.Sprintf("a table must have 2 axes, not %d", len(u.Axes)))
		}
		if u.BITPIX != 8 {
			return h.structural("BITPIX", fmt.Sprintf("a table must have 8, not %d", u.BITPIX))
		}
		if gcount != 1 {
			return h.structural("GCOUNT", "a table must have 1")
		}
	}
	return nil
}

// multiply sets dataSize = |BITPIX|/8 gcount (pcount + product of the axes from first on).
func (u *HDU) multiply(first int, pcount, gcount int64) error {
	size, card := int64(0), "PCOUNT"
	if len(u.Axes) > first {
		size = 1
	}
	fits := true
	for i := first; i < len(u.Axes) && fits && size > 0; i++ {
		if card = axisKey(i); slices.Contains(u.Axes[first:], 0) {
			size = 0
			break
		}
		size, fits = multiplied(size, int64(u.Axes[i]))
	}
	if fits = fits && size <= math.MaxInt64-pcount; fits {
		if size, fits = multiplied(size+pcount, gcount); fits {
			size, fits = multiplied(size, int64(max(u.BITPIX, -u.BITPIX)/8))
		}
	}
	// The last blocks of such a size could not be addressed either.
	if !fits || size > math.MaxInt64-maxHeader-blockSize {
		e := u.Header.structural(card, "the axes multiply to more bytes than any file has")
		e.Err = ErrTooLarge
		return e
	}
	u.dataSize = size
	return nil
}

// multiplied gives a b of two numbers >= 0, and whether it fits.
func multiplied(a, b int64) (int64, bool) {
	high, low := bits.Mul64(uint64(a), uint64(b))
	return int64(low), high == 0 && low <= math.MaxInt64
}

func axisKey(i int) string { return "NAXIS" + strconv.Itoa(i+1) }

// mandatory reads a structural integer within limits: a true integer, as the layout of the
// file hangs on it. Errors unwrap to ErrStructure.
func (h *Header) mandatory(key string, least, most int64) (int64, error) {
	v, err := h.value(key)
	if err != nil {
		var e *Error
		errors.As(err, &e)
		return 0, h.structural(key, e.What)
	}
	n, ok := v.(int64)
	if !ok {
		return 0, h.structural(key, fmt.Sprintf("the value is %s, not an integer", describe(v)))
	}
	if n < least || n > most {
		return 0, h.structural(key, fmt.Sprintf("%d is not within %d to %d", n, least, most))
	}
	return n, nil
}

// optional reads a structural count >= 0 that some writers leave out.
func (h *Header) optional(key string, missing int64) (int64, error) {
	if !h.Has(key) {
		return missing, nil
	}
	return h.mandatory(key, 0, math.MaxInt64)
}

// structural is a fault of a mandatory card.
func (h *Header) structural(key, what string) *Error {
	place := int64(none)
	if i, found := h.index[key]; found {
		place = h.place(i)
	}
	return &Error{File: h.file, HDU: h.hdu, Card: key, Offset: place,
		What: what, Cure: "the file is damaged or written wrongly: correct the card", Err: ErrStructure}
}
