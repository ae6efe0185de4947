package fitsutil

import (
	"encoding/binary"
	"math"
	"sync"
)

// readChunk is how much is read and converted at once: it stays in a core's L2 cache (1 to 2
// MiB on servers, 256 KiB at the least) between the copy from the system and the conversion.
const readChunk = 128 << 10

// buffers lends the chunks to all readers.
var buffers = sync.Pool{New: func() any { b := make([]byte, readChunk); return &b }}

func getBuffer() *[]byte  { return buffers.Get().(*[]byte) }
func putBuffer(b *[]byte) { buffers.Put(b) }

// scaling turns stored bytes into physical values.
type scaling struct {
	bitpix      int
	zero, scale float64
	blank       int64
	hasBlank    bool
	table       *[256]float32 // physical values of all bytes, for BITPIX = 8
}

// readScaling reads BZERO, BSCALE and BLANK (Standard 4.4.2.5).
func readScaling(u *HDU) (scaling, error) {
	s := scaling{bitpix: u.BITPIX, scale: 1}
	var err error
	if u.Header.Has("BZERO") {
		if s.zero, err = u.Header.Float("BZERO"); err != nil {
			return s, err
		}
	}
	if u.Header.Has("BSCALE") {
		if s.scale, err = u.Header.Float("BSCALE"); err != nil {
			return s, err
		}
		if s.scale == 0 {
			return s, &Error{File: u.Header.file, HDU: u.Index, Card: "BSCALE", Offset: u.Header.place(u.Header.index["BSCALE"]),
				What: "a scale of 0 makes all pixels the same", Cure: "correct the card", Err: ErrBadCard}
		}
	}
	if u.BITPIX > 0 && u.Header.Has("BLANK") {
		if s.blank, err = u.Header.Int("BLANK"); err != nil {
			return s, err
		}
		s.hasBlank = true
	}
	if u.BITPIX == 8 {
		s.table = s.byteTable()
	}
	return s, nil
}

func (s *scaling) byteTable() *[256]float32 {
	var t [256]float32
	for i := range t {
		t[i] = s.physical(float64(i))
		if s.hasBlank && int64(i) == s.blank {
			t[i] = float32(math.NaN())
		}
	}
	return &t
}

// physical scales one stored value. The product is rounded before the sum (no fused
// multiply-add), so that every processor gives the same bits.
func (s *scaling) physical(stored float64) float32 {
	return float32(s.zero + float64(s.scale*stored))
}

// convert gives the physical values of len(dst) stored ones, the first of raw.
func (s *scaling) convert(dst []float32, raw []byte) {
	plain := s.zero == 0 && s.scale == 1
	switch s.bitpix {
	case 8:
		for i, b := range raw[:len(dst)] {
			dst[i] = s.table[b]
		}
	case 16:
		switch {
		case plain:
			convert16(dst, raw)
		case s.unsigned(1 << 15):
			convertUnsigned16(dst, raw)
		default:
			s.scale16(dst, raw)
		}
	case 32:
		switch {
		case plain:
			convert32(dst, raw)
		case s.unsigned(1 << 31):
			convertUnsigned32(dst, raw)
		default:
			s.scale32(dst, raw)
		}
	case 64:
		s.convert64(dst, raw, plain)
	case -32:
		convertFloat32(dst, raw)
		if !plain {
			for i, v := range dst {
				dst[i] = s.physical(float64(v))
			}
		}
	case -64:
		s.convertFloat64(dst, raw, plain)
	}
	if s.hasBlank && s.bitpix != 8 {
		s.markBlank(dst, raw)
	}
}

// unsigned tells whether the image holds unsigned integers by convention (Standard 5.2.5).
func (s *scaling) unsigned(zero float64) bool { return s.scale == 1 && s.zero == zero }

// The loops below take 8 bytes at a time, which one instruction loads and reverses.

func convert16(dst []float32, raw []byte) {
	for len(dst) >= 4 && len(raw) >= 8 {
		u := binary.BigEndian.Uint64(raw)
		dst[0], dst[1] = float32(int16(u>>48)), float32(int16(u>>32))
		dst[2], dst[3] = float32(int16(u>>16)), float32(int16(u))
		dst, raw = dst[4:], raw[8:]
	}
	for i := range dst {
		dst[i] = float32(int16(binary.BigEndian.Uint16(raw[2*i:])))
	}
}

// convertUnsigned16 adds 32768 by turning the sign bit.
func convertUnsigned16(dst []float32, raw []byte) {
	for len(dst) >= 4 && len(raw) >= 8 {
		u := binary.BigEndian.Uint64(raw) ^ 0x8000800080008000
		dst[0], dst[1] = float32(uint16(u>>48)), float32(uint16(u>>32))
		dst[2], dst[3] = float32(uint16(u>>16)), float32(uint16(u))
		dst, raw = dst[4:], raw[8:]
	}
	for i := range dst {
		dst[i] = float32(binary.BigEndian.Uint16(raw[2*i:]) ^ 0x8000)
	}
}

func (s *scaling) scale16(dst []float32, raw []byte) {
	for i := range dst {
		dst[i] = s.physical(float64(int16(binary.BigEndian.Uint16(raw[2*i:]))))
	}
}

func convert32(dst []float32, raw []byte) {
	for len(dst) >= 2 && len(raw) >= 8 {
		u := binary.BigEndian.Uint64(raw)
		dst[0], dst[1] = float32(int32(u>>32)), float32(int32(u))
		dst, raw = dst[2:], raw[8:]
	}
	if len(dst) > 0 {
		dst[0] = float32(int32(binary.BigEndian.Uint32(raw)))
	}
}

// convertUnsigned32 adds 2^31 by turning the sign bit.
func convertUnsigned32(dst []float32, raw []byte) {
	for i := range dst {
		dst[i] = float32(binary.BigEndian.Uint32(raw[4*i:]) ^ 1<<31)
	}
}

func (s *scaling) scale32(dst []float32, raw []byte) {
	for i := range dst {
		dst[i] = s.physical(float64(int32(binary.BigEndian.Uint32(raw[4*i:]))))
	}
}

func (s *scaling) convert64(dst []float32, raw []byte, plain bool) {
	flip := s.unsigned(1 << 63)
	for i := range dst {
		u := binary.BigEndian.Uint64(raw[8*i:])
		switch {
		case plain:
			dst[i] = float32(int64(u))
		case flip:
			dst[i] = float32(u ^ 1<<63)
		default:
			dst[i] = s.physical(float64(int64(u)))
		}
	}
}

func convertFloat32(dst []float32, raw []byte) {
	for len(dst) >= 2 && len(raw) >= 8 {
		u := binary.BigEndian.Uint64(raw)
		dst[0], dst[1] = math.Float32frombits(uint32(u>>32)), math.Float32frombits(uint32(u))
		dst, raw = dst[2:], raw[8:]
	}
	if len(dst) > 0 {
		dst[0] = math.Float32frombits(binary.BigEndian.Uint32(raw))
	}
}

func (s *scaling) convertFloat64(dst []float32, raw []byte, plain bool) {
	for i := range dst {
		v := math.Float64frombits(binary.BigEndian.Uint64(raw[8*i:]))
		if plain {
			dst[i] = float32(v)
		} else {
			dst[i] = s.physical(v)
		}
	}
}

// markBlank makes the pixels NaN whose stored value is BLANK. A pass of its own keeps the
// loops above free of a comparison that most files do not need.
func (s *scaling) markBlank(dst []float32, raw []byte) {
	nan := float32(math.NaN())
	for i := range dst {
		var stored int64
		switch s.bitpix {
		case 16:
			stored = int64(int16(binary.BigEndian.Uint16(raw[2*i:])))
		case 32:
			stored = int64(int32(binary.BigEndian.Uint32(raw[4*i:])))
		case 64:
			stored = int64(binary.BigEndian.Uint64(raw[8*i:]))
		}
		if stored == s.blank {
			dst[i] = nan
		}
	}
}
