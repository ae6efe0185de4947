package calib

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// ArcParameter names the rows of ArcSolution.Covariance.
type ArcParameter int

// The parameters that arcs measure. X_c, Y_c and L_c stay nominal: what the light is
// off along x is carried by J_c, so that X_c remains the column at which trace rows
// are counted.
const (
	ArcJ_c ArcParameter = iota
	ArcX_e
	ArcD1
	ArcD2
	ArcD3
	ArcSlitTilt
	ArcSmile
	arcParameters
)

// ArcSolution is the wavelength solution of all elements and rows.
type ArcSolution struct {
	// Geometry is nominal with the parameters of ArcParameter replaced; its trace is
	// untouched: set TraceTilt and TraceCurve from FitTrace.
	Geometry Geometry
	// Covariance of the parameters, in the order of ArcParameter.
	Covariance *mat.SymDense
	// RMSPx is the rms of the centroids kept around the model.
	RMSPx float64
	// Used and Rejected count centroids of identified lines; Lines and LinesRejected
	// the lines, those of different frames once.
	Used, Rejected, Lines, LinesRejected int
	// ExtraErrorPx is the error that the centroids show besides their own, LineErrorPx
	// that common to a line's centroids: what the list or an unseen neighbour is off by.
	ExtraErrorPx, LineErrorPx float64
	// FirstNM and LastNM are the outermost lines used: beyond them the model
	// extrapolates, which ErrorPx knows.
	FirstNM, LastNM float64
	// Match is how the lines were recognized.
	Match ArcMatch
	// Residuals of all identified centroids, by frame and line.
	Residuals []ArcResidual
	// Width is FWHM against wavelength.
	Width LineWidth

	// Blocks count the centroids, in order of element and row: see LinesAt.
	Blocks []ArcBlock
}

// ArcResidual is one identified centroid.
type ArcResidual struct {
	Element           int
	FirstRow, LastRow int
	VacuumNM          float64
	X, XErr           float64
	ResidualPx        float64 // X - model
	FWHM, FWHMErr     float64
	Flux              float64
	Kept              bool
}

// ArcError is returned where the lines could not be recognized beyond doubt, or do
// not fix the model: the caller keeps the nominal geometry and flags NOMINALWAVE.
type ArcError struct {
	What  string
	Match ArcMatch // as far as it came
}

func (e *ArcError) Error() string { return "arcs: " + e.What }

// keptWeight is the biweight below which a centroid counts as rejected: beyond 0.95
// of the cut.
const keptWeight = 0.01

// collect lists the residuals and counts.
func (r *ArcSolution) collect(f *arcFit) {
	f.lineMeans() // the residuals of the final parameters
	sum := 0.0
	seen := make([]bool, f.lines)
	for i := range f.data {
		d := f.data[i].ArcResidual
		d.Kept = f.data[i].weight >= keptWeight && !f.dropped[f.data[i].line]
		r.Residuals = append(r.Residuals, d)
		if !d.Kept {
			r.Rejected++
			continue
		}
		r.Used++
		sum += d.ResidualPx * d.ResidualPx
		seen[f.data[i].line] = true
		r.FirstNM, r.LastNM = min(r.FirstNM, d.VacuumNM), max(r.LastNM, d.VacuumNM)
	}
	for _, s := range seen {
		if s {
			r.Lines++
		} else {
			r.LinesRejected++
		}
	}
	r.RMSPx = math.Sqrt(sum / float64(r.Used))
	r.countBlocks()
}

// ErrorPx is the standard error of the model's x for element j on detector row y at
// vacuumNM, px.
func (r *ArcSolution) ErrorPx(j, y, vacuumNM float64) float64 {
	g := &r.Geometry
	l, q := vacuumNM-g.L_c, y-g.Y_c
	v := mat.NewVecDense(int(arcParameters), []float64{-g.X_e, j - g.J_c, l, l * l, l * l * l, q, q * q})
	return math.Sqrt(max(0, mat.Inner(v, r.Covariance, v)))
}

// ArcBlock sums up the centroids of an element's block of rows, FirstRow to LastRow;
// Squares is the sum of the squared residuals of those used, px^2.
type ArcBlock struct {
	Element, FirstRow, LastRow int
	Used, Rejected             int
	Squares                    float64
}

// countBlocks fills in Blocks from Residuals, in order of element and row.
func (r *ArcSolution) countBlocks() {
	at := map[[2]int]int{}
	for i := range r.Residuals {
		d := &r.Residuals[i]
		key := [2]int{d.Element, d.FirstRow}
		k, ok := at[key]
		if !ok {
			k = len(r.Blocks)
			at[key] = k
			r.Blocks = append(r.Blocks, ArcBlock{Element: d.Element, FirstRow: d.FirstRow, LastRow: d.LastRow})
		}
		if b := &r.Blocks[k]; d.Kept {
			b.Used++
			b.Squares += d.ResidualPx * d.ResidualPx
		} else {
			b.Rejected++
		}
	}
	slices.SortFunc(r.Blocks, func(a, b ArcBlock) int {
		return cmp.Or(cmp.Compare(a.Element, b.Element), cmp.Compare(a.FirstRow, b.FirstRow))
	})
}

// LinesAt counts the centroids that speak for element j on detector row y: those of the
// nearest element with an arc and, of its blocks, the nearest; rms is around the
// model, NaN for none.
func (r *ArcSolution) LinesAt(j, y int) (used, rejected int, rmsPx float64) {
	blocks := r.nearestBlocks(j)
	if len(blocks) == 0 {
		return 0, 0, math.NaN()
	}
	along := func(b *ArcBlock) int { return max(b.FirstRow+b.LastRow-2*y, 2*y-b.FirstRow-b.LastRow) }
	b := &blocks[0]
	for i := range blocks {
		if along(&blocks[i]) < along(b) {
			b = &blocks[i]
		}
	}
	rmsPx = math.NaN()
	if b.Used > 0 {
		rmsPx = math.Sqrt(b.Squares / float64(b.Used))
	}
	return b.Used, b.Rejected, rmsPx
}

// nearestBlocks are those of the element with an arc that is nearest to j.
func (r *ArcSolution) nearestBlocks(j int) []ArcBlock {
	from := func(element int) int {
		i, _ := slices.BinarySearchFunc(r.Blocks, element, func(b ArcBlock, e int) int { return cmp.Compare(b.Element, e) })
		return i
	}
	at := from(j)
	if at == len(r.Blocks) || at > 0 && j-r.Blocks[at-1].Element <= r.Blocks[at].Element-j {
		at--
	}
	if at < 0 {
		return nil
	}
	element := r.Blocks[at].Element
	return r.Blocks[from(element):from(element+1)]
}

// String is the solution in a sentence, for logs.
func (r *ArcSolution) String() string {
	return fmt.Sprintf("%d centroids of %d lines from %.2f to %.2f nm, rms %.4f px, %d rejected", r.Used, r.Lines, r.FirstNM, r.LastNM, r.RMSPx, r.Rejected)
}
