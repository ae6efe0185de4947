package fitsutil

import (
	"encoding/binary"
	"math"
)

// getBuffer lends chunkBytes bytes, in which what is read is converted.
func getBuffer() *[]byte  { return chunks.Get().(*[]byte) }
func putBuffer(b *[]byte) { chunks.Put(b) }

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
		convert8(dst, raw, s.table)
	case 16:
		if s.unsigned(1 << 15) {
			convertUnsigned16(dst, raw)
			break
		}
		convert16(dst, raw) // exact
		if !plain {
			s.rescale(dst)
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
			s.rescale(dst)
		}
	case -64:
		s.convertFloat64(dst, raw, plain)
	}
	if s.hasBlank && s.bitpix != 8 {
		s.markBlank(dst, raw)
	}
}

// rescale turns stored values that float32 holds exactly into physical ones.
func (s *scaling) rescale(dst []float32) {
	for len(dst) >= 4 {
		d := (*[4]float32)(dst)
		d[0], d[1] = s.physical(float64(d[0])), s.physical(float64(d[1]))
		d[2], d[3] = s.physical(float64(d[2])), s.physical(float64(d[3]))
		dst = dst[4:]
	}
	for i, v := range dst {
		dst[i] = s.physical(float64(v))
	}
}

// unsigned tells whether the image holds unsigned integers by convention (Standard 5.2.5).
func (s *scaling) unsigned(zero float64) bool { return s.scale == 1 && s.zero == zero }

// The loops below take 8 or 16 bytes at a time, through arrays of known length: one instruction
// loads and reverses 8 bytes, and the compiler needs to check bounds only once. That doubles
// to triples their speed over pixel by pixel (measured on an AMD EPYC).

func convert8(dst []float32, raw []byte, table *[256]float32) {
	for len(dst) >= 8 && len(raw) >= 8 {
		d, u := (*[8]float32)(dst), binary.LittleEndian.Uint64(raw)
		d[0], d[1], d[2], d[3] = table[byte(u)], table[byte(u>>8)], table[byte(u>>16)], table[byte(u>>24)]
		d[4], d[5], d[6], d[7] = table[byte(u>>32)], table[byte(u>>40)], table[byte(u>>48)], table[byte(u>>56)]
		dst, raw = dst[8:], raw[8:]
	}
	for i := range dst {
		dst[i] = table[raw[i]]
	}
}

func convert16(dst []float32, raw []byte) {
	for len(dst) >= 8 && len(raw) >= 16 {
		d, r := (*[8]float32)(dst), (*[16]byte)(raw)
		u, v := binary.BigEndian.Uint64(r[:]), binary.BigEndian.Uint64(r[8:])
		d[0], d[1] = float32(int16(u>>48)), float32(int16(u>>32))
		d[2], d[3] = float32(int16(u>>16)), float32(int16(u))
		d[4], d[5] = float32(int16(v>>48)), float32(int16(v>>32))
		d[6], d[7] = float32(int16(v>>16)), float32(int16(v))
		dst, raw = dst[8:], raw[16:]
	}
	for i := range dst {
		dst[i] = float32(int16(binary.BigEndian.Uint16(raw[2*i:])))
	}
}

// convertUnsigned16 adds 32768 by turning the sign bit.
func convertUnsigned16(dst []float32, raw []byte) {
	const signs = 0x8000800080008000
	for len(dst) >= 8 && len(raw) >= 16 {
		d, r := (*[8]float32)(dst), (*[16]byte)(raw)
		u, v := binary.BigEndian.Uint64(r[:])^signs, binary.BigEndian.Uint64(r[8:])^signs
		d[0], d[1] = float32(uint16(u>>48)), float32(uint16(u>>32))
		d[2], d[3] = float32(uint16(u>>16)), float32(uint16(u))
		d[4], d[5] = float32(uint16(v>>48)), float32(uint16(v>>32))
		d[6], d[7] = float32(uint16(v>>16)), float32(uint16(v))
		dst, raw = dst[8:], raw[16:]
	}
	for i := range dst {
		dst[i] = float32(binary.BigEndian.Uint16(raw[2*i:]) ^ 0x8000)
	}
}

func convert32(dst []float32, raw []byte) {
	for len(dst) >= 4 && len(raw) >= 16 {
		d, r := (*[4]float32)(dst), (*[16]byte)(raw)
		u, v := binary.BigEndian.Uint64(r[:]), binary.BigEndian.Uint64(r[8:])
		d[0], d[1] = float32(int32(u>>32)), float32(int32(u))
		d[2], d[3] = float32(int32(v>>32)), float32(int32(v))
		dst, raw = dst[4:], raw[16:]
	}
	for i := range dst {
		dst[i] = float32(int32(binary.BigEndian.Uint32(raw[4*i:])))
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
	for len(dst) >= 4 && len(raw) >= 16 {
		d, r := (*[4]float32)(dst), (*[16]byte)(raw)
		u, v := binary.BigEndian.Uint64(r[:]), binary.BigEndian.Uint64(r[8:])
		d[0], d[1] = math.Float32frombits(uint32(u>>32)), math.Float32frombits(uint32(u))
		d[2], d[3] = math.Float32frombits(uint32(v>>32)), math.Float32frombits(uint32(v))
		dst, raw = dst[4:], raw[16:]
	}
	for i := range dst {
		dst[i] = math.Float32frombits(binary.BigEndian.Uint32(raw[4*i:]))
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
