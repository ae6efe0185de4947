package fitsutil

import (
	"fmt"
	"math"
	"strings"
)

// scale applies TSCALn, TZEROn and TNULLn to stored values.
func (c *Column) scale(h *Header, number int, format columnFormat) error {
	if !strings.ContainsRune("BIJKED", rune(format.code)) {
		return c.checkDim(h, number, format)
	}
	scale, err := optionalNumber(h, fmt.Sprintf("TSCAL%d", number), 1)
	if err != nil {
		return err
	}
	zero, err := optionalNumber(h, fmt.Sprintf("TZERO%d", number), 0)
	if err != nil {
		return err
	}
	if scale == 0 {
		return fmt.Errorf("%w: TSCAL%d is 0, which makes all values the same", ErrBadCard, number)
	}
	if key := fmt.Sprintf("TNULL%d", number); h.Has(key) && strings.ContainsRune("BIJK", rune(format.code)) {
		null, err := h.Int(key)
		if err != nil {
			return err
		}
		// A value that the type cannot hold stands for nothing.
		if holds(format.code, null) {
			c.Null = &null
		}
	}
	if scale == 1 && zero == 0 {
		return nil
	}
	integers, ok := widen(c.Data)
	if !ok {
		c.Data = scaleFloats(c.Data, scale, zero)
		c.Format = columnFormat{format.repeat, 'D'}.text()
		return nil
	}
	if scale == 1 && zero == signOffset[format.code] {
		return c.shift(integers, format)
	}
	c.Data, c.Null = scaleIntegers(integers, c.Null, scale, zero), nil
	c.Format = columnFormat{format.repeat, 'D'}.text()
	return nil
}

// signOffset is the TZERO by which unsigned integers, for B signed ones, are
// stored (FITS 4.0 table 19).
var signOffset = map[byte]float64{'B': -128, 'I': 1 << 15, 'J': 1 << 31, 'K': 1 << 63}

// shift turns integers stored with a signOffset into wider signed ones.
func (c *Column) shift(stored []int64, format columnFormat) error {
	if format.code == 'K' {
		values := make([]int64, len(stored))
		for i, v := range stored {
			// Values 0 to 2^63-1 are stored as -2^63 to -1.
			if v >= 0 {
				return fmt.Errorf("%w: value %d is beyond a signed 64-bit integer", ErrRange, i+1)
			}
			values[i] = v ^ math.MinInt64
		}
		if c.Null != nil {
			null := *c.Null ^ math.MinInt64
			c.Null = &null
		}
		c.Data = values
		return nil
	}
	offset := int64(signOffset[format.code])
	if c.Null != nil {
		null := *c.Null + offset
		c.Null = &null
	}
	switch format.code {
	case 'B':
		c.Data, format.code = shifted[int16](stored, offset), 'I'
	case 'I':
		c.Data, format.code = shifted[int32](stored, offset), 'J'
	case 'J':
		c.Data, format.code = shifted[int64](stored, offset), 'K'
	}
	c.Format = format.text()
	return nil
}

func shifted[T int16 | int32 | int64](stored []int64, offset int64) []T {
	values := make([]T, len(stored))
	for i, v := range stored {
		values[i] = T(v + offset)
	}
	return values
}

func scaleFloats(data any, scale, zero float64) []float64 {
	var values []float64
	switch d := data.(type) {
	case []float32:
		values = make([]float64, len(d))
		for i, v := range d {
			values[i] = zero + scale*float64(v)
		}
	case []float64:
		values = make([]float64, len(d))
		for i, v := range d {
			values[i] = zero + scale*v
		}
	}
	return values
}

// checkDim refuses arrays of strings, which TDIMn makes of one field.
func (c *Column) checkDim(h *Header, number int, format columnFormat) error {
	dim := optionalText(h, fmt.Sprintf("TDIM%d", number))
	if format.code == 'A' && strings.Contains(dim, ",") {
		return fmt.Errorf("%w: TDIM%d = %s makes it an array of strings, which is not read", ErrType, number, dim)
	}
	return nil
}

// optionalNumber is a number card that changes the meaning of the data: when
// it is there it must be understood.
func optionalNumber(h *Header, key string, missing float64) (float64, error) {
	if !h.Has(key) {
		return missing, nil
	}
	return h.Float(key)
}

// holds tells whether a column of a type letter can store an integer.
func holds(code byte, v int64) bool {
	switch code {
	case 'B':
		return v >= 0 && v <= math.MaxUint8
	case 'I':
		return v >= math.MinInt16 && v <= math.MaxInt16
	case 'J':
		return v >= math.MinInt32 && v <= math.MaxInt32
	}
	return code == 'K'
}
