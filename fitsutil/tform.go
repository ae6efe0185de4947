package fitsutil

import (
	"fmt"
	"strconv"
	"strings"
)

// columnFormat is a parsed TFORMn: repeat elements of one type code a row.
type columnFormat struct {
	repeat int
	code   byte
}

// bytesByCode is the width of one element (FITS 4.0 table 18). X counts bits
// and P, Q are descriptors of arrays in the heap: known here so that the
// columns after them can be found, not so that they can be read.
var bytesByCode = map[byte]int{
	'L': 1, 'B': 1, 'I': 2, 'J': 4, 'K': 8, 'E': 4, 'D': 8, 'A': 1,
	'C': 8, 'M': 16, 'P': 8, 'Q': 16,
}

// maxRowBytes bounds a row, so that no product of a repeat count with a width
// overflows.
const maxRowBytes = 1 << 40

// parseFormat reads the value of a TFORMn card: an optional repeat count, one
// letter and, for P and Q alone, more text.
func parseFormat(text string) (columnFormat, error) {
	text = strings.TrimSpace(text)
	digits := 0
	for digits < len(text) && text[digits] >= '0' && text[digits] <= '9' {
		digits++
	}
	repeat := 1
	if digits > 0 {
		n, err := strconv.Atoi(text[:digits])
		if err != nil || n > maxRowBytes/16 {
			return columnFormat{}, fmt.Errorf("the repeat count of format %q is out of range", text)
		}
		repeat = n
	}
	if digits == len(text) {
		return columnFormat{}, fmt.Errorf("format %q has no type letter", text)
	}
	f := columnFormat{repeat: repeat, code: text[digits]}
	if _, known := bytesByCode[f.code]; !known && f.code != 'X' {
		return columnFormat{}, fmt.Errorf("format %q has the unknown type letter %q", text, f.code)
	}
	// The standard lets an 'A' format carry a substring width after its
	// letter (rAw); the field is r bytes wide all the same.
	rest := text[digits+1:]
	if rest != "" && f.code != 'P' && f.code != 'Q' && f.code != 'A' {
		return columnFormat{}, fmt.Errorf("format %q has text after its type letter", text)
	}
	if (f.code == 'P' || f.code == 'Q') && f.repeat > 1 {
		return columnFormat{}, fmt.Errorf("format %q repeats an array descriptor", text)
	}
	return f, nil
}

// bytes is the width of the field in a row.
func (f columnFormat) bytes() int {
	if f.code == 'X' {
		return (f.repeat + 7) / 8
	}
	return f.repeat * bytesByCode[f.code]
}

// elements is the number of values a row that the column's slice holds: a
// string of any width is one, and a field of no width holds none.
func (f columnFormat) elements() int {
	if f.code == 'A' && f.repeat > 0 {
		return 1
	}
	return f.repeat
}

// text is the value of the TFORMn card.
func (f columnFormat) text() string {
	return strconv.Itoa(f.repeat) + string(f.code)
}
