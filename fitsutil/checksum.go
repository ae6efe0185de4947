package fitsutil

import (
	"encoding/binary"
	"math/bits"
)

// The checksum of FITS 4.0 section 4.4.2.7 and appendix J: an HDU is a run of
// big-endian 32-bit words, added with end-around carry (ones' complement).
//
// Because 2^32 = 1 in that arithmetic, a byte counts by its lane alone, that
// is by its offset in the HDU modulo 4: runs of bytes may be summed apart, in
// any order and by any goroutine, if each keeps its lane. A run that starts at
// lane r is summed as if it started at lane 0 and the result rotated right by
// 8 r bits, since a rotation multiplies by a power of 2.

// sumRun is the ones'-complement sum of the bytes p, the first of which lies at
// offset from the start of the HDU (or of its data unit, which starts at a
// multiple of 2880 from it). The result is 0 only if every byte is 0; the other
// zero of ones'-complement arithmetic is 0xFFFFFFFF. A run need not be a
// multiple of four bytes: what lies outside it counts as zero.
func sumRun(offset int64, p []byte) uint32 {
	// Four independent 64-bit sums hide the latency of the carry chain; a
	// 64-bit sum folds to the 32-bit one because 2^32-1 divides 2^64-1.
	var a, b, c, d uint64
	for len(p) >= 32 {
		a = addCarry64(a, binary.BigEndian.Uint64(p))
		b = addCarry64(b, binary.BigEndian.Uint64(p[8:]))
		c = addCarry64(c, binary.BigEndian.Uint64(p[16:]))
		d = addCarry64(d, binary.BigEndian.Uint64(p[24:]))
		p = p[32:]
	}
	a = addCarry64(addCarry64(a, b), addCarry64(c, d))
	for len(p) >= 4 {
		a = addCarry64(a, uint64(binary.BigEndian.Uint32(p)))
		p = p[4:]
	}
	if len(p) > 0 {
		var tail [4]byte
		copy(tail[:], p)
		a = addCarry64(a, uint64(binary.BigEndian.Uint32(tail[:])))
	}
	sum := addSums(uint32(a>>32), uint32(a))
	lane := int(offset & 3)
	return bits.RotateLeft32(sum, -8*lane)
}

// addCarry64 adds with end-around carry.
func addCarry64(a, b uint64) uint64 {
	sum, carry := bits.Add64(a, b, 0)
	return sum + carry
}

// addSums adds two ones'-complement sums: associative and commutative, so the
// sum of an HDU does not depend on the order in which its runs were written.
func addSums(a, b uint32) uint32 {
	sum := uint64(a) + uint64(b)
	return uint32(sum) + uint32(sum>>32)
}

// encodeChecksum is the text of a CHECKSUM card that makes the HDU sum to -0.
// sum is the sum of the whole HDU with the card's value set to 16 characters
// "0"; it is complemented here. Algorithm of FITS 4.0 appendix J.2: each byte
// of the complement is spread over four letters or digits whose sum, less four
// times the character "0", is the byte.
func encodeChecksum(sum uint32) string {
	var text [16]byte
	complement := ^sum
	for i := range 4 {
		letters := spreadByte(byte(complement >> (24 - 8*i)))
		for j, letter := range letters {
			// The rotation by one place puts the words in phase with the
			// value, which starts at column 12 of its card: lane 3.
			text[(4*j+i+1)%16] = letter
		}
	}
	return string(text[:])
}

// spreadByte writes b as four characters and moves them, in pairs that keep
// their sum, off the punctuation between the digits and the letters.
func spreadByte(b byte) [4]byte {
	quotient := b/4 + '0'
	letters := [4]byte{quotient + b%4, quotient, quotient, quotient}
	for pair := 0; pair < 4; pair += 2 {
		for isPunctuation(letters[pair]) || isPunctuation(letters[pair+1]) {
			letters[pair]++
			letters[pair+1]--
		}
	}
	return letters
}

func isPunctuation(c byte) bool {
	return c > '9' && c < 'A' || c > 'Z' && c < 'a'
}
