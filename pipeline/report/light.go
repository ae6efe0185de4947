package report

import (
	"context"
	"fmt"
	"slices"

	"mirrorloom/pipeline/product"
)

const (
	// Of a cube whose signal and flags hold more than this many bytes only every
	// so manieth plane is looked at: a gibibyte is read in a few seconds.
	scanBytes = 1 << 30
	// Rows are read in pieces of about this many voxels, 1 MiB of float32.
	pieceVoxels = 1 << 18
	// bytesPerVoxel of SIGNAL and FLAGS together, as product writes them.
	bytesPerVoxel = 4 + 2
)

// Light is the mean over wavelength of the good voxels. Write makes it of cube.fits, unless
// whoever writes the cube has it look at each row (AddRow).
type Light struct {
	elements, rows int
	mean           []float64 // [row][element]; the sum until finished, then NaN without a good voxel
	good           []int32   // good voxels among the planes looked at
	planes, all    int       // planes looked at, and all
	flagged        []int64   // voxels that have the flag, in the order of product.Flags
	finished       bool
	bad            int16 // flags of voxels that do not count
}

// LightBytes is the memory of a Light, for each element and row.
const LightBytes = 8 + 4

// NewLight is for a cube of so many elements, rows and wavelengths.
func NewLight(elements, rows, wavelengths int) *Light {
	return &Light{
		elements: elements, rows: rows, mean: make([]float64, elements*rows), good: make([]int32, elements*rows),
		planes: wavelengths, all: wavelengths, flagged: make([]int64, len(product.Flags())), bad: product.FlagBad,
	}
}

// AddRow looks at the voxels of a row at one wavelength, one an element. Wavelengths of a
// row must come in order, so that the sum has the same bits as one over planes.
func (w *Light) AddRow(row int, signal []float32, flags []int16) {
	at := row * w.elements
	mean, good := w.mean[at:at+w.elements], w.good[at:at+w.elements]
	signal, flags = signal[:len(mean)], flags[:len(mean)]
	// Neighbours mostly have the same flags.
	same, run := int16(0), int64(0)
	for i := range mean {
		bits, v := flags[i], signal[i]
		if bits&w.bad == 0 && v == v {
			mean[i] += float64(v)
			good[i]++
		}
		if bits != same {
			w.countFlags(same, run)
			same, run = bits, 0
		}
		run++
	}
	w.countFlags(same, run)
}

func (w *Light) countFlags(bits int16, voxels int64) {
	if bits == 0 {
		return
	}
	for n, flag := range allFlags {
		if bits&flag.Bit != 0 {
			w.flagged[n] += voxels
		}
	}
}

// allFlags are those of a cube.
var allFlags = product.Flags()

// empty tells whether no voxel counts.
func (w *Light) empty() bool {
	return !slices.ContainsFunc(w.good, func(n int32) bool { return n > 0 })
}

// finish turns sums into means.
func (w *Light) finish() {
	if w.finished {
		return
	}
	w.finished = true
	for i, n := range w.good {
		w.mean[i] /= float64(n) // NaN for 0/0
	}
}

// light reads the cube's.
func (c *cube) light(ctx context.Context) (*Light, error) {
	w := NewLight(c.elements(), c.rows(), c.signal.Planes())
	w.planes, w.bad = 0, c.bad
	stride := strideFor(w.elements*w.rows, w.all)
	piece := min(max(1, pieceVoxels/w.elements), w.rows)
	signal, flags := make([]float32, piece*w.elements), make([]float32, piece*w.elements)
	bits := make([]int16, w.elements)
	for l := stride / 2; l < w.all; l += stride {
		w.planes++
		for y := 0; y < w.rows; y += piece {
			if err := ctx.Err(); err != nil {
				return nil, err
			}
			end := min(y+piece, w.rows)
			s, f := signal[:(end-y)*w.elements], flags[:(end-y)*w.elements]
			if err := c.signal.ReadPlaneRows(s, l, y, end); err != nil {
				return nil, err
			}
			if err := c.flags.ReadPlaneRows(f, l, y, end); err != nil {
				return nil, err
			}
			for row := y; row < end; row++ {
				from := (row - y) * w.elements
				for i := range bits {
					bits[i] = int16(f[from+i])
				}
				w.AddRow(row, s[from:from+w.elements], bits)
			}
		}
	}
	return w, nil
}

// strideFor is the distance of the planes to look at: the middle one of every
// stride planes, and at least one plane.
func strideFor(voxels, planes int) int {
	most := max(1, scanBytes/(bytesPerVoxel*max(voxels, 1)))
	return max(1, (planes+most-1)/most)
}

// note says which planes the picture shows.
func (w *Light) note() string {
	if w.planes == w.all {
		return fmt.Sprintf("all %d wavelengths", w.all)
	}
	return fmt.Sprintf("%d of %d wavelengths, evenly chosen as the cube is large", w.planes, w.all)
}
