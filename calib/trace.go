package calib

import (
	"errors"

	"gonum.org/v1/gonum/mat"
)

// RowEnd is where lit mirror rows end, seen on the detector: half the light.
type RowEnd struct {
	// Row is nominal, at x = X_c: Y_c + w_step (w -+ 1/2 - r_c).
	Row float64
	// Above: the light lies at higher rows (the lower end of the device).
	Above bool
}

// EdgePoint is a measured RowEnd at a column.
type EdgePoint struct {
	Group   int     // points of one group share their own constant: an end of an element
	Nominal float64 // RowEnd.Row
	X       float64
	Y, YErr float64
}

// TraceRule says how ends are measured.
type TraceRule struct {
	FWHMPx float64 // of the spot
	// Columns are averaged to one point.
	Columns int
	// ReachPx is how far an end may be from nominal.
	ReachPx float64
}

// DefaultTraceRule averages 8 columns.
func DefaultTraceRule(fwhmPx float64) TraceRule { return TraceRule{FWHMPx: fwhmPx} }

// Find measures ends in light whose rows end at the same device rows for all
// elements that shine at once: an all-on lamp frame where the lit rows make a
// rectangle; one element's decoded light or arc exposure in any case. firstGroup
// numbers the first end; ends off the detector give no point.
func (r TraceRule) Find(e Exposure, ends []RowEnd, firstGroup int) ([]EdgePoint, error) {
	return nil, errors.New("being built")
}

// TraceSolution is the trace common to all.
type TraceSolution struct {
	TraceTilt, TraceCurve float64
	Covariance            *mat.SymDense // of the two
	RMSPx                 float64
	Used, Rejected        int
	// OffsetPx is the mean of (measured - nominal) row of the ends at X_c, PlateScale
	// the measured w step over nominal (from ends at different rows; NaN with one),
	// with standard errors: checks, not applied.
	OffsetPx, OffsetErr         float64
	PlateScale, PlateScaleError float64
}

// TraceError is returned where no end is on the detector or none is clear.
type TraceError struct{ What string }

func (e *TraceError) Error() string { return "trace: " + e.What }

// FitTrace fits y = const(group) + TraceTilt (x-X_c) + TraceCurve (x-X_c)^2.
func FitTrace(nominal Geometry, points []EdgePoint) (*TraceSolution, error) {
	return nil, errors.New("being built")
}
