package reduce

import "fmt"

// shape is what a reduction's memory depends on.
type shape struct {
	columns, rows int // active pixels
	slots         int // code rows
	elements      int
	voxels        int // along the wavelength
	margin        int // rows that a trace needs beyond its own, on both sides together
	uniform       bool
	elementCube   bool
	cube          bool
}

// heights are the rows of a strip and of a strip of the cube.
type heights struct{ strip, out int }

const (
	// runtimeBytes is what the program takes besides the buffers planned here:
	// code, file headers, tables of weights and the workers' blocks.
	runtimeBytes = 56 << 20

	bytesFloat = 4
	// Of a voxel in a strip of the cube: SIGNAL, VARIANCE, FLAGS, SCALE.
	bytesVoxel = 4 + 4 + 2 + 4

	// planeRun is the shortest run in bytes that is written to a plane of the
	// cube in one piece, where memory allows: shorter ones make the disk seek, and
	// of 16 KiB take twice the system's time of 64 KiB (measured on ext4).
	planeRun = 64 << 10
)

// heights divides the memory among the buffers: two strips of frames (one
// being read), the window of decoded rows, two strips of the cube (one being
// written). The error says
// how much is needed at least.
func (s shape) heights(memory int64) (heights, error) {
	out := 0
	if s.cube {
		out = min(s.rows, max(1, planeRun/(bytesFloat*s.elements)))
	}
	budget := memory - runtimeBytes - spared(memory)
	perRow := s.stripRow() + s.window(1)
	// The cube's strip gives way before the frames' strip does.
	for out > 1 && (s.outBytes(out) > budget/2 || s.outBytes(out)+perRow > budget) {
		out--
	}
	strip := (budget - s.outBytes(out)) / perRow
	if strip < 1 {
		need := runtimeBytes + s.outBytes(min(out, 1)) + perRow
		if need > sparedFrom { // less what is spared of it
			need = (need*sparedPart-sparedFrom)/(sparedPart-1) + 1
		}
		return heights{}, fmt.Errorf("--memory of %d MiB is too little for frames of %d x %d pixels; give at least %d MiB", memory>>20, s.columns, s.rows, need>>20+1)
	}
	return heights{strip: int(min(int64(s.rows), strip)), out: out}, nil
}

// spared is what of the memory is left for the garbage collector, which would else run all
// the time: where the buffers are large, so is what it finds late.
func spared(memory int64) int64 { return max(0, (memory-sparedFrom)/sparedPart) }

const (
	sparedFrom = 128 << 20
	sparedPart = 12
)

// outBytes is the memory that a strip of the cube of so many rows asks for: its
// voxels, twice as one is written while the next is made, and the decoded rows that wait
// until it can be filled.
func (s shape) outBytes(rows int) int64 {
	if !s.cube {
		return 0
	}
	return outStrips*int64(rows)*int64(s.elements)*int64(s.voxels)*bytesVoxel + s.window(s.margin+rows)
}

// stripRow is the memory of one row of a strip: two buffers of every slot's pixels and
// of what is taken off them, with flags, and the decoded columns if they are a product
// of their own.
func (s shape) stripRow() int64 {
	const taken = 5 // base, off, level, levelVariance; two sets of flags
	planes := 2 * (s.slots + taken)
	if s.elementCube {
		planes += s.slots
		if !s.uniform {
			planes += s.slots
		}
	}
	return int64(planes) * int64(s.columns) * bytesFloat
}

// window is the memory of decoded rows.
func (s shape) window(rows int) int64 {
	planes := s.elements + 12 // variances, pedestal, error scale, and the flags
	if !s.uniform {
		planes += s.elements
	}
	return int64(rows) * int64(planes) * int64(s.columns) * bytesFloat
}
