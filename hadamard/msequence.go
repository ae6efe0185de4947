package hadamard

import "math/bits"

const (
	minDegree = 2
	maxDegree = 12 // v = 4095
)

// primitive holds one primitive polynomial over GF(2) for each degree, bit t
// the coefficient of x^t. They are the entries of fewest terms of the table in
// Peterson and Weldon 1972, Error-Correcting Codes, appendix C; the octal
// numbers are written as there. The tests count the order of x.
var primitive = [maxDegree + 1]uint32{
	2:  0o7,
	3:  0o13,
	4:  0o23,
	5:  0o45,
	6:  0o103,
	7:  0o203,
	8:  0o435,
	9:  0o1021,
	10: 0o2011,
	11: 0o4005,
	12: 0o10123,
}

// degreeOf is p of v = 2^p - 1.
func degreeOf(v int) int { return bits.Len(uint(v)) }

// mSequence is one period, 2^degree - 1 bits, of the recurrence
// s[i+p] = xor of s[i+t] over the lower exponents t, from 0...01.
func mSequence(degree int) []uint8 {
	s := make([]uint8, 1<<degree-1)
	taps := primitive[degree] &^ (1 << degree)
	state := uint32(1) << (degree - 1) // bit t is s[i+t]
	for i := range s {
		s[i] = uint8(state & 1)
		state = nextState(state, taps, degree)
	}
	return s
}

// nextState moves the window (s[i], ..., s[i+p-1]), s[i+t] in bit t, by one.
func nextState(state, taps uint32, degree int) uint32 {
	feedback := uint32(bits.OnesCount32(state&taps)) & 1
	return state>>1 | feedback<<(degree-1)
}

// stepIndex gives, for each row i of an m-sequence code, the window of s at i
// as a number of 1..v, and columnIndex, for each column j, the polynomial
// x^j mod Poly as a number of 1..v. By the recurrence s[i+j] is the parity of
// stepIndex[i] AND columnIndex[j]. So 1-2W[i][j] is the entry
// (stepIndex[i], columnIndex[j]) of the Sylvester Hadamard matrix of order
// v+1, and W is that matrix without its first row and column, between two
// permutations (Nelson and Fredman 1970, J. Opt. Soc. Am. 60, 1664; Cohn and
// Lempel 1977, IEEE Trans. Inf. Theory 23, 135).
func stepIndex(degree int) []int {
	index := make([]int, 1<<degree-1)
	taps := primitive[degree] &^ (1 << degree)
	state := uint32(1) << (degree - 1)
	for i := range index {
		index[i] = int(state)
		state = nextState(state, taps, degree)
	}
	return index
}

// columnIndex: see stepIndex.
func columnIndex(degree int) []int {
	index := make([]int, 1<<degree-1)
	power := uint32(1)
	for j := range index {
		index[j] = int(power)
		power <<= 1
		if power>>degree != 0 {
			power ^= primitive[degree]
		}
	}
	return index
}
