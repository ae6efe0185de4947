package fitsutil

import (
	"encoding/binary"
	"math"
)

// markBlank makes the pixels NaN whose stored value is BLANK (Standard 4.4.2.5). A pass of its
// own keeps the conversions free of a comparison that most files do not need.
func (s *scaling) markBlank(dst []float32, raw []byte) {
	nan := float32(math.NaN())
	switch s.bitpix {
	case 16:
		if s.blank == int64(int16(s.blank)) { // no pixel can hold another
			markBlank16(dst, raw, uint16(s.blank))
		}
	case 32:
		if s.blank != int64(int32(s.blank)) {
			return
		}
		for i := range dst {
			if binary.BigEndian.Uint32(raw[4*i:]) == uint32(s.blank) {
				dst[i] = nan
			}
		}
	case 64:
		for i := range dst {
			if binary.BigEndian.Uint64(raw[8*i:]) == uint64(s.blank) {
				dst[i] = nan
			}
		}
	}
}

// markBlank16 passes over four pixels at once where none of them is blank: a lane that is zero
// after the exclusive or is the only one to set its top bit in (x - 1) &^ x, but for a lane above
// such a one, so that no blank is missed.
func markBlank16(dst []float32, raw []byte, blank uint16) {
	const ones, tops = 0x0001000100010001, 0x8000800080008000
	nan := float32(math.NaN())
	for len(dst) > 0 {
		n := min(4, len(dst))
		if n == 4 {
			x := binary.BigEndian.Uint64(raw) ^ ones*uint64(blank)
			if (x-ones)&^x&tops == 0 {
				dst, raw = dst[4:], raw[8:]
				continue
			}
		}
		for i := range n {
			if binary.BigEndian.Uint16(raw[2*i:]) == blank {
				dst[i] = nan
			}
		}
		dst, raw = dst[n:], raw[2*n:]
	}
}
