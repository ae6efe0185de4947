package calib

import "errors"

// Peak is a line found in the sum of a block of detector rows.
type Peak struct {
	// FirstRow and LastRow bound the block, inclusive.
	FirstRow, LastRow int
	// X is the centroid, px from 0, at the block's mean row; XErr its standard error.
	X, XErr float64
	// FWHM of the pixel-integrated profile, px, freed of the pixel's own width.
	FWHM, FWHMErr float64
	// Flux of the block, electrons.
	Flux, FluxErr float64
}

// PeakRule says what counts as a line.
type PeakRule struct {
	// FWHMPx is the expected width of a line, px.
	FWHMPx float64
	// BlockRows is how many detector rows are summed.
	BlockRows int
	// Sigmas is the least significance of a line in a block.
	Sigmas float64
	// EdgeRows are left out at both ends of the lit rows: the light there comes from
	// one side only, which moves the centroid.
	EdgeRows int
}

// DefaultPeakRule sums 8 rows and asks for 8 sigma.
func DefaultPeakRule(fwhmPx float64) PeakRule { return PeakRule{FWHMPx: fwhmPx} }

// Find measures the lines of one arc exposure. Rows firstRow..lastRow are lit by the
// element all along x; it may be called from several goroutines.
func (r PeakRule) Find(e Exposure, firstRow, lastRow int) ([]Peak, error) {
	return nil, errors.New("being built")
}
