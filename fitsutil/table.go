package fitsutil

import (
	"errors"
	"fmt"
	"math"
	"strings"
)

// ErrMissingColumn: the table has no column of that name.
var ErrMissingColumn = errors.New("no such column")

// Table is a binary table (BINTABLE, FITS 4.0 section 7.3) held in memory.
//
// Header holds the cards that describe neither the structure nor a column:
// those are made from Name and Columns when the table is written and left out
// when it is read. It may be nil.
type Table struct {
	Name    string // EXTNAME; needed to write
	Header  *Header
	Columns []Column

	place place // of a table that was read
	rows  int   // rows of a table that was read; columns of no width cannot tell
}

// Column is a column of a Table: the values of all rows, one row after the
// other.
//
//	Format  Data        elements a row
//	nL      []bool      n
//	nB      []uint8     n
//	nI      []int16     n
//	nJ      []int32     n
//	nK      []int64     n
//	nE      []float32   n
//	nD      []float64   n
//	nA      []string    1, of at most n printable ASCII characters
//
// n is 1 when left out, and a field of width 0 has no element. A column that
// was read has the format of its Data: TZERO and TSCAL are applied already, so
// an unsigned 16-bit column has format J and a scaled one D (see readTable).
// Strings are read up to their first NUL, without trailing spaces.
type Column struct {
	Name   string // TTYPE
	Format string // TFORM
	Unit   string // TUNIT; may be empty
	// Null is the value of a B, I, J or K column that stands for "undefined"
	// (TNULL), nil when there is none.
	Null *int64
	Data any

	err error // why Data is nil: a column that was read and cannot be given
}

// place says where a table lies, for its errors.
type place struct {
	file string
	hdu  int
}

func (p place) error(sentinel error, card, what, cure string) *Error {
	return &Error{File: p.file, HDU: p.hdu, Card: card, Offset: none, What: what, Cure: cure, Err: sentinel}
}

// Rows is the number of rows: that of the first column whose fields have an
// element; of columns that have none, what the file said (0 for a new table).
func (t *Table) Rows() int {
	for i := range t.Columns {
		format, err := parseFormat(t.Columns[i].Format)
		if err != nil || t.Columns[i].Data == nil || format.elements() == 0 {
			continue
		}
		return dataLength(t.Columns[i].Data) / format.elements()
	}
	return t.rows
}

// Column finds a column by its name, in which case does not count (section
// 7.3.1). The errors are an *Error: ErrMissingColumn; ErrStructure when two
// columns have the name; and, for a column that was read, what keeps it from
// being given: ErrType for arrays of variable length, complex numbers and bits,
// ErrBadCard for a description that cannot be understood, ErrStructure for
// bytes that its type does not allow.
func (t *Table) Column(name string) (*Column, error) {
	var found *Column
	for i := range t.Columns {
		if !strings.EqualFold(t.Columns[i].Name, name) {
			continue
		}
		if found != nil {
			return nil, t.where().error(ErrStructure, "", fmt.Sprintf("table %s has two columns %s", t.Name, name), "rename one")
		}
		found = &t.Columns[i]
	}
	if found == nil {
		return nil, t.where().error(ErrMissingColumn, "", fmt.Sprintf("table %s has no column %s", t.Name, name), "it has: "+t.names())
	}
	if found.err != nil {
		return nil, found.err
	}
	return found, nil
}

// where is the table's place; a table that was not read has none.
func (t *Table) where() place {
	if t.place == (place{}) {
		return place{hdu: none}
	}
	return t.place
}

func (t *Table) names() string {
	names := make([]string, len(t.Columns))
	for i := range t.Columns {
		names[i] = t.Columns[i].Name
	}
	return strings.Join(names, ", ")
}

// Bools gives a column of format L. As with all getters below, the slice is the
// column's own when no conversion is needed, and the errors are those of
// Column, and ErrType when the column is of another type.
func (t *Table) Bools(name string) ([]bool, error) {
	return getExact[bool](t, name, "logicals")
}

// Strings gives a column of format A.
func (t *Table) Strings(name string) ([]string, error) {
	return getExact[string](t, name, "strings")
}

// Float32s gives a column of format E.
func (t *Table) Float32s(name string) ([]float32, error) {
	return getExact[float32](t, name, "32-bit floats")
}

// Int32s gives a column of integers that all fit 32 bits; ErrRange when one
// does not, or is undefined (TNULL).
func (t *Table) Int32s(name string) ([]int32, error) {
	return getIntegers[int32](t, name, math.MinInt32, math.MaxInt32)
}

// Int64s gives a column of integers; ErrRange when one is undefined (TNULL).
func (t *Table) Int64s(name string) ([]int64, error) {
	return getIntegers[int64](t, name, math.MinInt64, math.MaxInt64)
}

// Float64s gives a column of numbers of any format as float64; undefined
// integers (TNULL) are NaN. Integers beyond 2^53 are rounded.
func (t *Table) Float64s(name string) ([]float64, error) {
	column, err := t.Column(name)
	if err != nil {
		return nil, err
	}
	switch d := column.Data.(type) {
	case []float64:
		return d, nil
	case []float32:
		values := make([]float64, len(d))
		for i, v := range d {
			values[i] = float64(v)
		}
		return values, nil
	}
	integers, ok := widen(column.Data)
	if !ok {
		return nil, t.wrongType(column, "numbers")
	}
	return scaleIntegers(integers, column.Null, 1, 0), nil
}

func getExact[T any](t *Table, name, wanted string) ([]T, error) {
	column, err := t.Column(name)
	if err != nil {
		return nil, err
	}
	values, ok := column.Data.([]T)
	if !ok {
		return nil, t.wrongType(column, wanted)
	}
	return values, nil
}

func getIntegers[T int32 | int64](t *Table, name string, least, most int64) ([]T, error) {
	column, err := t.Column(name)
	if err != nil {
		return nil, err
	}
	integers, ok := widen(column.Data)
	if !ok {
		return nil, t.wrongType(column, "integers")
	}
	for i, v := range integers {
		if column.Null != nil && v == *column.Null {
			return nil, t.where().error(ErrRange, "", fmt.Sprintf("column %s, value %d is undefined (TNULL)", column.Name, i+1), "fill it, or read the column as floats")
		}
		if v < least || v > most {
			return nil, t.where().error(ErrRange, "", fmt.Sprintf("column %s, value %d is %d, beyond 32 bits", column.Name, i+1, v), "correct the value")
		}
	}
	if values, ok := column.Data.([]T); ok {
		return values, nil
	}
	values := make([]T, len(integers))
	for i, v := range integers {
		values[i] = T(v)
	}
	return values, nil
}

func (t *Table) wrongType(column *Column, wanted string) error {
	return t.where().error(ErrType, "", fmt.Sprintf("column %s has format %s, where %s are needed", column.Name, column.Format, wanted), "write it with another TFORM")
}

// widen gives integers of any width as int64; ok is false for other data.
func widen(data any) (values []int64, ok bool) {
	switch d := data.(type) {
	case []uint8:
		return widenSlice(d), true
	case []int16:
		return widenSlice(d), true
	case []int32:
		return widenSlice(d), true
	case []int64:
		return d, true
	}
	return nil, false
}

func widenSlice[T uint8 | int16 | int32](d []T) []int64 {
	values := make([]int64, len(d))
	for i, v := range d {
		values[i] = int64(v)
	}
	return values
}

// scaleIntegers gives zero + scale times the stored integers, NaN for null.
func scaleIntegers(stored []int64, null *int64, scale, zero float64) []float64 {
	values := make([]float64, len(stored))
	for i, v := range stored {
		if null != nil && v == *null {
			values[i] = math.NaN()
			continue
		}
		values[i] = zero + scale*float64(v)
	}
	return values
}

// dataLength is the length of a column's slice; -1 for a type that no column
// can have.
func dataLength(data any) int {
	switch d := data.(type) {
	case []bool:
		return len(d)
	case []string:
		return len(d)
	case []uint16:
		return -1 // an image's type
	}
	if _, count, ok := sampleTypeOf(data); ok {
		return count
	}
	return -1
}
