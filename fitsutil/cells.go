package fitsutil

import (
	"encoding/binary"
	"fmt"
	"math"
	"strings"
)

// cells collects the values of a column that is being read, field by field.
type cells interface {
	take(field []byte) error
	data() any
}

// newCells makes the collector of a format that can be read, with room for its
// values; the caller has made sure that the file holds that many rows.
func newCells(format columnFormat, rows int) cells {
	count := rows * format.elements()
	if format.elements() == 0 {
		count = 0 // rows may be any number then
	}
	switch format.code {
	case 'L':
		return &logicalCells{make([]bool, 0, count)}
	case 'A':
		return &stringCells{make([]string, 0, count)}
	case 'B':
		return &byteCells{make([]uint8, 0, count)}
	case 'I':
		return newNumbers(2, count, func(b []byte) int16 { return int16(binary.BigEndian.Uint16(b)) })
	case 'J':
		return newNumbers(4, count, func(b []byte) int32 { return int32(binary.BigEndian.Uint32(b)) })
	case 'K':
		return newNumbers(8, count, func(b []byte) int64 { return int64(binary.BigEndian.Uint64(b)) })
	case 'E':
		return newNumbers(4, count, func(b []byte) float32 { return math.Float32frombits(binary.BigEndian.Uint32(b)) })
	case 'D':
		return newNumbers(8, count, func(b []byte) float64 { return math.Float64frombits(binary.BigEndian.Uint64(b)) })
	}
	panic("internal error: cells of an unchecked format")
}

type numberCells[T any] struct {
	values []T
	size   int
	decode func([]byte) T
}

func newNumbers[T any](size, count int, decode func([]byte) T) *numberCells[T] {
	return &numberCells[T]{values: make([]T, 0, count), size: size, decode: decode}
}

func (c *numberCells[T]) take(field []byte) error {
	for ; len(field) > 0; field = field[c.size:] {
		c.values = append(c.values, c.decode(field))
	}
	return nil
}

func (c *numberCells[T]) data() any { return c.values }

type byteCells struct{ values []uint8 }

func (c *byteCells) take(field []byte) error {
	c.values = append(c.values, field...)
	return nil
}

func (c *byteCells) data() any { return c.values }

type logicalCells struct{ values []bool }

// take reads T and F; the 0 of an undefined logical has no bool and is
// refused like any other byte.
func (c *logicalCells) take(field []byte) error {
	for _, b := range field {
		if b != 'T' && b != 'F' {
			return fmt.Errorf("%w: byte %d is no logical, which is T or F", ErrStructure, b)
		}
		c.values = append(c.values, b == 'T')
	}
	return nil
}

func (c *logicalCells) data() any { return c.values }

type stringCells struct{ values []string }

// take reads a string up to its first NUL, which ends it (section 7.3.3.1).
func (c *stringCells) take(field []byte) error {
	text, _, _ := strings.Cut(string(field), "\x00")
	if !printable(text) {
		return fmt.Errorf("%w: a string holds bytes outside printable ASCII", ErrStructure)
	}
	c.values = append(c.values, strings.TrimRight(text, " "))
	return nil
}

func (c *stringCells) data() any { return c.values }
