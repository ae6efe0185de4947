package calib

import "fmt"

// Exposure is one plane of calibrated light with its variance: a frame after bias,
// dark and gain, or decoded light. Rows of Columns pixels one after the other, from
// detector row 0.
type Exposure struct {
	Columns int
	// Signal in electrons, Variance in electrons squared.
	Signal, Variance []float32
	// Flags of the pixels; nil for none. Saturated, BadPixel and NoData count.
	Flags []Flag
}

// Rows is the number of detector rows.
func (e *Exposure) Rows() int { return len(e.Signal) / max(e.Columns, 1) }

// check refuses slices that do not fit each other.
func (e *Exposure) check() error {
	n := len(e.Signal)
	if e.Columns < 1 || n == 0 || n%e.Columns != 0 || len(e.Variance) != n || e.Flags != nil && len(e.Flags) != n {
		return fmt.Errorf("exposure: %d values, %d variances and %d flags do not make rows of %d pixels; give whole rows of each",
			n, len(e.Variance), len(e.Flags), e.Columns)
	}
	return nil
}
