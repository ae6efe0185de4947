package audit

import (
	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
)

// Cycle is what the engine knows of the frames of one cycle: the sums over sampled
// pixels, and what frames and steps say of themselves. Frames are counted in the order
// in which they were given, code rows in that of the code.
type Cycle struct {
	Code *hadamard.Code
	// Dark are the dark columns, Elements the code column of each element in field
	// order.
	Dark, Elements []int
	// Gram is summed over sampled pixels, a row a frame: as many rows as frames.
	Gram *hadamard.Gram
	// Parts are the same of parts of the sample, to tell what all of it shows from what
	// a few pixels do; nil if there are none.
	Parts []*hadamard.Gram
	// MostPixels is how large the sample may get; 0 if it cannot grow.
	MostPixels int
	// Pairing is, by code row, the frame that is labelled with it; none without.
	Pairing []int
	// Spare are frames without a label, more than there are rows.
	Spare []int
	// Level is the sum of y/s over the samples, by frame; nil if unknown.
	Level []float64
	// Order lists the code rows as the steps show them.
	Order []int
	// Place is when a frame was taken: -1/2 for the first of the night, 1/2 for the
	// last; by order of the steps where no time is known.
	Place []float64
	// Time lists the frames in the order in which they were taken; nil if not known.
	Time []int
	// Mirrors is the width of an element; masks slip by single mirrors.
	Mirrors int
}

// none stands for no frame, or no row.
const none = -1

// engine holds a cycle's matrices.
type engine struct {
	*Cycle
	v, frames, pixels int
	projector         *mat.Dense // P on contrasts, by code row
	freedom           int        // its rank
	sum               *mat.Dense // G, by frame
	noise             []float64  // by frame
	inverse           *mat.Dense // A: row j decodes column j
}

// newEngine prepares a cycle. Pedestals pass unseen: bias, dark current and leak are
// the same in all frames.
func newEngine(c *Cycle) (*engine, error) {
	checks, err := hadamard.NewChecks(c.Code, c.Dark)
	if err != nil {
		return nil, err
	}
	checks = checks.WithoutPedestal()
	e := &engine{Cycle: c, v: c.Code.V(), frames: c.Gram.V(), pixels: c.Gram.Pixels, freedom: checks.G()}
	e.projector = mat.DenseCopyOf(checks.Projector())
	e.sum, e.noise = mat.DenseCopyOf(c.Gram.Sum()), c.Gram.Noise()
	e.inverse = mat.NewDense(e.v, e.v, nil)
	open, closed := c.Code.InverseEntries()
	for j := range e.v {
		row := e.inverse.RawRowView(j)
		for k := range row {
			row[k] = closed
			if c.Code.Bit(k, j) == 1 {
				row[k] = open
			}
		}
	}
	return e, nil
}
