package calib

import (
	"errors"

	"gonum.org/v1/gonum/mat"
)

// ArcRule says how far the instrument may be from nominal, and what a fit keeps.
type ArcRule struct {
	// ShiftPx and Scale bound the search: offset along x in px, and relative error of
	// the dispersion.
	ShiftPx, Scale float64
}

// DefaultArcRule searches 15 px and 2 %, with a margin.
func DefaultArcRule() ArcRule { return ArcRule{} }

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
	// untouched.
	Geometry Geometry
	// Covariance of the parameters in the order of ArcParameter, scaled by the scatter.
	Covariance *mat.SymDense
	// RMSPx is the rms of the lines kept.
	RMSPx float64
	// Used and Rejected count centroids.
	Used, Rejected int
	// FirstNM and LastNM are the outermost lines used: beyond is extrapolation, which
	// ErrorPx knows.
	FirstNM, LastNM float64
	// Match is how the lines were recognized.
	Match ArcMatch
	// Residuals of all identified centroids, by frame, block and x.
	Residuals []ArcResidual
	// Width is FWHM against wavelength.
	Width LineWidth
}

// ArcMatch says how certain the identification is.
type ArcMatch struct {
	// ShiftPx and Scale are the best pair found.
	ShiftPx, Scale float64
	// Matched of the Peaks, and by the second best pair that differs in meaning.
	Score, Second  float64
	Matched, Peaks int
}

// ArcResidual is one identified centroid.
type ArcResidual struct {
	Element           int
	FirstRow, LastRow int
	VacuumNM          float64
	X, XErr           float64
	ResidualPx        float64 // X - model
	FWHM, Flux        float64
	Kept              bool
}

// LineWidth is a smooth FWHM against wavelength.
type LineWidth struct{ coef []float64 }

// FWHMPx is the width of a line, px.
func (w LineWidth) FWHMPx(vacuumNm float64) float64 { return 0 }

// ArcError is returned where the lines could not be recognized beyond doubt, or do
// not fix the model: the caller keeps the nominal geometry and flags NOMINALWAVE.
type ArcError struct {
	What  string
	Match ArcMatch
}

func (e *ArcError) Error() string { return "arcs: " + e.What }

// SolveArcs identifies the peaks and fits the model to all of them. Errors that come
// from the data are *ArcError.
func SolveArcs(nominal Geometry, frames []ArcFrame, rule ArcRule) (*ArcSolution, error) {
	return nil, errors.New("being built")
}

// ErrorPx is the standard error of the model's x for element j on detector row y where
// vacuumNm falls, px.
func (s *ArcSolution) ErrorPx(j, y, vacuumNm float64) float64 { return 0 }

// Lines counts the centroids that speak for element j on detector row y, and their
// rms: those of the nearest frame in j and the nearest block in y.
func (s *ArcSolution) Lines(j, y int) (used, rejected int, rmsPx float64) { return 0, 0, 0 }
