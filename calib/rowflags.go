package calib

import "math"

// RowFlags are the flags of one row with the weight at which each reaches it: a
// row straightened by RowShift holds only a share of each flagged pixel. The zero
// value flags nothing and serves any width. Reuse one from row to row.
type RowFlags struct {
	Bits  []Flag    // per column
	Reach []float32 // 0 where Bits is 0; else the share of flagged pixels
	// before[x] is the number of flagged columns left of x: one subtraction tells
	// the hot loop that a voxel touches none.
	before []int32
}

// Set flags a row that has not been shifted: every flagged pixel reaches it whole.
// bits is copied.
func (f *RowFlags) Set(bits []Flag) {
	f.resize(len(bits))
	for x, b := range bits {
		f.Bits[x], f.Reach[x] = b, 0
		if b != 0 {
			f.Reach[x] = 1
		}
	}
	f.count()
}

func (f *RowFlags) resize(columns int) {
	if cap(f.before) < columns+1 {
		f.Bits = make([]Flag, columns)
		f.Reach = make([]float32, columns)
		f.before = make([]int32, columns+1)
	}
	f.Bits, f.Reach, f.before = f.Bits[:columns], f.Reach[:columns], f.before[:columns+1]
}

func (f *RowFlags) count() {
	n := int32(0)
	for x, b := range f.Bits {
		f.before[x] = n
		if b != 0 {
			n++
		}
	}
	f.before[len(f.Bits)] = n
}

// touched tells whether any column of first..last-1 is flagged.
func (f *RowFlags) touched(first, last int) bool {
	return f != nil && f.before != nil && f.before[last] != f.before[first]
}

// gather is the union of the flags that reach a voxel with weights w, of the
// columns from first on.
func (f *RowFlags) gather(first int, w []float32) Flag {
	var bits Flag
	reach := f.Reach[first : first+len(w)]
	for i, r := range reach {
		if r > 0 && math.Abs(float64(w[i]*r)) > reachLimit {
			bits |= f.Bits[first+i]
		}
	}
	return bits
}
