package calib

import (
	"fmt"
	"math"
	"slices"
)

// sigmasPerFWHM: a Gaussian's FWHM is 2 sqrt(2 ln 2) of its sigma.
const sigmasPerFWHM = 2.3548200450309493

// Peak is a line found in the sum of a block of detector rows.
type Peak struct {
	// FirstRow and LastRow bound the block, inclusive.
	FirstRow, LastRow int
	// X is the line's centre at the block's mean row, px from 0; XErr its standard
	// error, widened where the profile fits badly.
	X, XErr float64
	// FWHM of the profile, px, freed of the pixel's own width.
	FWHM, FWHMErr float64
	// Flux of the block, electrons.
	Flux, FluxErr float64
}

// PeakRule says what counts as a line. The zero value of a field other than FWHMPx
// takes the default.
type PeakRule struct {
	// FWHMPx is the expected width of a line, px: see LineFWHM.
	FWHMPx float64
	// BlockRows is how many detector rows are summed (8): few enough that the slit's
	// tilt within them is small against a line.
	BlockRows int
	// Sigmas is the least significance of a line in a block (8: in a night some 1e5
	// places are looked at, and weak lines add nothing to the fit).
	Sigmas float64
	// EdgeRows are left out at both ends of the lit rows, at most a quarter of them:
	// there light comes from one side only, which moves the centroid along a tilted
	// slit, and a trace off by 2.5 rows moves the end (1.5 FWHM + 3).
	EdgeRows int
}

// DefaultPeakRule is the rule for an expected FWHM.
func DefaultPeakRule(fwhmPx float64) PeakRule {
	return PeakRule{FWHMPx: fwhmPx, BlockRows: 8, Sigmas: 8, EdgeRows: int(math.Ceil(1.5*fwhmPx)) + 3}
}

// LineFWHM is the width of an unresolved line, px, for a spot of lsfFWHMPx and an
// element that is elementPx wide: the FWHM of the Gaussian with the variance of both.
func LineFWHM(lsfFWHMPx, elementPx float64) float64 {
	return math.Sqrt(lsfFWHMPx*lsfFWHMPx + sigmasPerFWHM*sigmasPerFWHM/12*elementPx*elementPx)
}

// A line's width over the expected one; beyond, it is a cosmic ray, a hot pixel or a
// blend.
const (
	narrowest = 0.7
	widest    = 1.45
)

// uncertain is the largest error of a line's centre, in FWHM: that of a line of 7 sigma.
// A bright line beyond it has bad pixels in its core.
const uncertain = 0.06

// Find measures the lines of one arc exposure over rows firstRow..lastRow, which the
// element lights all along x; where closed rows part them, call it for each part. It
// may be called from several goroutines.
//
// Candidates are the maxima of the smoothed second difference. They are then fitted,
// neighbours jointly, by Gaussians integrated over pixels (Levenberg-Marquardt:
// Marquardt 1963, J. SIAM 11, 431).
// Left out: lines with a saturated sample, next to the detector's ends, of a width
// that no line has, or below Sigmas. A list without any is no error.
func (r PeakRule) Find(e Exposure, firstRow, lastRow int) ([]Peak, error) {
	if err := e.check(); err != nil {
		return nil, err
	}
	if firstRow < 0 || lastRow >= e.Rows() || firstRow > lastRow {
		return nil, fmt.Errorf("arc: rows %d to %d are not in an exposure of %d rows", firstRow, lastRow, e.Rows())
	}
	if r = r.complete(); !(r.FWHMPx >= 1) || math.IsInf(r.FWHMPx, 0) {
		return nil, fmt.Errorf("arc: a line's width of %g px is none; give its FWHM, 1 px or more", r.FWHMPx)
	}
	edge := min(r.EdgeRows, (lastRow-firstRow+1)/4)
	firstRow, lastRow = firstRow+edge, lastRow-edge
	// Blocks as equal as may be, none smaller than two thirds of BlockRows.
	rows := lastRow - firstRow + 1
	blocks := max(1, (rows+r.BlockRows/3)/r.BlockRows)
	var peaks []Peak
	for b := range blocks {
		s := sumBlock(&e, firstRow+b*rows/blocks, firstRow+(b+1)*rows/blocks-1)
		peaks = append(peaks, r.findIn(s)...)
	}
	return peaks, nil
}

func (r PeakRule) complete() PeakRule {
	d := DefaultPeakRule(r.FWHMPx)
	if r.BlockRows > 0 {
		d.BlockRows = r.BlockRows
	}
	if r.Sigmas > 0 {
		d.Sigmas = r.Sigmas
	}
	if r.EdgeRows > 0 {
		d.EdgeRows = r.EdgeRows
	}
	return d
}

// findIn lists the lines of a block in order of x.
func (r PeakRule) findIn(s *blockSpectrum) []Peak {
	candidates := r.candidates(s)
	s.takePedestal(candidates, 3*r.FWHMPx)
	var peaks []Peak
	for i := 0; i < len(candidates); {
		// A group: neighbours whose wings touch are fitted together.
		n := 1
		for i+n < len(candidates) && candidates[i+n]-candidates[i+n-1] < 3*r.FWHMPx {
			n++
		}
		peaks = append(peaks, r.fitGroup(s, candidates[i:i+n])...)
		i += n
	}
	return peaks
}

// candidates are the columns where the curvature has a significant maximum.
func (r PeakRule) candidates(s *blockSpectrum) []float64 {
	significance := r.curvature(s)
	var list []float64
	for x := 1; x < len(significance)-1; x++ {
		if v := significance[x]; v >= r.Sigmas && v > significance[x-1] && v >= significance[x+1] {
			list = append(list, float64(x))
		}
	}
	return list
}

// curvature is the significance of -s”, smoothed: the generalized second difference
// of Mariscotti (1967, Nucl. Instrum. Methods 50, 309). It is blind to any background
// that is straight over a line's width, tells lines apart that are 1.5 FWHM from each
// other, and has no positive side lobes.
func (r PeakRule) curvature(s *blockSpectrum) []float64 {
	const narrower = 0.7 // the filter's sigma in those of a line: resolution against noise
	sigma := narrower * r.FWHMPx / sigmasPerFWHM
	half := int(math.Ceil(4 * sigma))
	filter := make([]float64, 2*half+1)
	mean := 0.0
	for i := range filter {
		d := float64(i-half) / sigma
		filter[i] = (1 - d*d) * math.Exp(-d*d/2)
		mean += filter[i] / float64(len(filter))
	}
	signal := s.bridged()
	result := make([]float64, len(signal))
	for x := half; x < len(result)-half; x++ {
		var sum, variance float64
		for i, f := range filter {
			at := x + i - half
			f -= mean
			sum += f * signal[at]
			variance += f * f * s.variance[at]
		}
		if variance > 0 {
			result[x] = sum / math.Sqrt(variance)
		}
	}
	return result
}

// bridged is the signal with straight lines over columns without value.
func (s *blockSpectrum) bridged() []float64 {
	signal := append([]float64(nil), s.signal...)
	last := -1
	for x := range signal {
		if s.variance[x] == 0 {
			continue
		}
		for i := last + 1; i < x && last >= 0; i++ {
			signal[i] = signal[last] + (signal[x]-signal[last])*float64(i-last)/float64(x-last)
		}
		last = x
	}
	return signal
}

// fitGroup fits the lines of a group and keeps those that are lines. What the fit
// leaves over shows weaker lines beside the bright ones; they join, and it is fitted
// again. Where it fails the weakest line goes.
func (r PeakRule) fitGroup(s *blockSpectrum, at []float64) []Peak {
	for range 3 {
		fit := r.newLineFit(s, at)
		for !fit.solve() {
			if at = fit.withoutWeakest(at); len(at) == 0 {
				return nil
			}
			fit = r.newLineFit(s, at)
		}
		more := r.leftOver(s, fit, at)
		if len(more) > 0 {
			at = append(slices.Clone(at), more...)
			slices.Sort(at)
			continue
		}
		return r.lines(s, fit, at)
	}
	fit := r.newLineFit(s, at)
	if !fit.solve() {
		return nil
	}
	return r.lines(s, fit, at)
}

// lines are the fitted peaks that are lines.
func (r PeakRule) lines(s *blockSpectrum, fit *lineFit, at []float64) []Peak {
	var peaks []Peak
	for k := range at {
		p := fit.peak(k)
		p.FirstRow, p.LastRow = s.firstRow, s.lastRow
		if r.isLine(s, p, at[k]) {
			peaks = append(peaks, p)
		}
	}
	return peaks
}

// leastBeside is the least height of a line against what a brighter one beside it
// has left at its place: a profile that is not quite Gaussian, and pixels of unequal
// response, leave one or two per cent.
const leastBeside = 0.05

// leftOver finds lines in the residuals of a fit, no nearer than 0.9 FWHM to those it
// has.
func (r PeakRule) leftOver(s *blockSpectrum, fit *lineFit, at []float64) []float64 {
	rest := &blockSpectrum{signal: make([]float64, len(s.signal)), variance: s.variance}
	for i, x := range fit.x {
		rest.signal[int(x)] = fit.value[i] - fit.model(fit.p, x)
	}
	var more []float64
	for _, x := range r.candidates(rest) {
		nearest, crest := math.Inf(1), 0.0
		for k := range at {
			d := math.Abs(fit.centre(k) - x)
			nearest = min(nearest, d)
			if d < 3*r.FWHMPx {
				crest = max(crest, fit.flux(k)/(math.Sqrt(2*math.Pi)*fit.sigma(k)))
			}
		}
		if nearest >= 0.9*r.FWHMPx && rest.signal[int(x)] > leastBeside*crest && s.variance[int(x)] > 0 {
			more = append(more, x)
		}
	}
	return more
}

// isLine judges a fitted peak that started at column `start`.
func (r PeakRule) isLine(s *blockSpectrum, p Peak, start float64) bool {
	if p.FWHM < narrowest*r.FWHMPx || p.FWHM > widest*r.FWHMPx || math.Abs(p.X-start) > 0.6*r.FWHMPx ||
		p.Flux < r.Sigmas*p.FluxErr || p.XErr > uncertain*r.FWHMPx {
		return false
	}
	last := float64(len(s.signal) - 1)
	if p.X < r.FWHMPx || p.X > last-r.FWHMPx {
		return false
	}
	missing := 0
	for x := int(math.Ceil(p.X - r.FWHMPx)); x <= int(p.X+r.FWHMPx); x++ {
		if s.saturated[x] {
			return false
		}
		if s.variance[x] == 0 {
			missing++
		}
	}
	// Half of the samples within the core must be there.
	return float64(missing) <= 0.5*r.FWHMPx
}
