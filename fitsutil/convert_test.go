package fitsutil

import (
	"encoding/binary"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// naive is Eq. 3 of the Standard's section 4.4.2.5, pixel by pixel.
func naive(s scaling, raw []byte) float32 {
	var stored int64
	switch s.bitpix {
	case 8:
		stored = int64(raw[0])
	case 16:
		stored = int64(int16(binary.BigEndian.Uint16(raw)))
	case 32:
		stored = int64(int32(binary.BigEndian.Uint32(raw)))
	case 64:
		stored = int64(binary.BigEndian.Uint64(raw))
	case -32:
		v := math.Float32frombits(binary.BigEndian.Uint32(raw))
		if s.zero == 0 && s.scale == 1 {
			return v
		}
		return float32(s.zero + float64(s.scale*float64(v)))
	case -64:
		v := math.Float64frombits(binary.BigEndian.Uint64(raw))
		if s.zero == 0 && s.scale == 1 {
			return float32(v) // the sign of -0 kept
		}
		return float32(s.zero + float64(s.scale*v))
	}
	switch {
	case s.hasBlank && stored == s.blank:
		return float32(math.NaN())
	case s.bitpix == 64 && s.scale == 1 && s.zero == 0:
		return float32(stored)
	case s.bitpix == 64 && s.scale == 1 && s.zero == 1<<63:
		return float32(uint64(stored) ^ 1<<63)
	}
	return float32(s.zero + float64(s.scale*float64(stored)))
}

// Every fast loop equals the naive rule in every bit, for all lengths up to two of its strides
// and more, all scalings, and stored values rich in BLANKs and their neighbours.
func TestConvertMeetsNaive(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 12))
	for _, bitpix := range []int{8, 16, 32, 64, -32, -64} {
		size := max(bitpix, -bitpix) / 8
		for _, scale := range [][2]float64{{0, 1}, {3, 1}, {-17.25, 0.3}, {1 << 15, 1}, {1 << 31, 1}, {1 << 63, 1}} {
			for _, blank := range []int64{0, 1, -1, 255, 256, -32768, 32767, -257, 1 << 40} {
				s := scaling{bitpix: bitpix, zero: scale[0], scale: scale[1], blank: blank, hasBlank: bitpix > 0}
				if bitpix == 8 {
					s.table = s.byteTable()
				}
				for n := range 36 {
					checkConvert(t, s, stored(rng, blank, size, n))
				}
			}
		}
	}
}

// stored makes n samples: random bytes, BLANK, and what differs from BLANK by one or by a bit.
func stored(rng *rand.Rand, blank int64, size, n int) []byte {
	var raw []byte
	for range n {
		v := uint64(blank)
		switch rng.IntN(5) {
		case 0:
			v = rng.Uint64()
		case 1:
			v += uint64(rng.IntN(3)) - 1
		case 2:
			v ^= 1 << rng.IntN(64)
		}
		raw = append(raw, binary.BigEndian.AppendUint64(nil, v)[8-size:]...)
	}
	return raw
}

func checkConvert(t *testing.T, s scaling, raw []byte) {
	t.Helper()
	size := max(s.bitpix, -s.bitpix) / 8
	n := len(raw) / size
	const guard = -12345
	got := make([]float32, n+2)
	got[0], got[n+1] = guard, guard
	s.convert(got[1:n+1], raw)
	want := make([]float32, n+2)
	want[0], want[n+1] = guard, guard
	for i := range n {
		want[i+1] = naive(s, raw[i*size:])
	}
	requireSame(t, want, got, fmt.Sprintf("%+v, %d pixels", s, n))
}
