package calib

import (
	"fmt"
	"math"
)

// EdgeRule tells struck pixels in a single frame by their sharp edges: Laplacian
// edge detection of van Dokkum 2001, PASP 113, 1420 (written from memory of the
// paper; checked against astroscrappy). Light comes through the optics and has no
// edge sharper than they allow, a cosmic ray has.
//
// Of a pixel of value p and its neighbours along the row (h) and along the column
// (v) the Laplacian is the mean over the pixel's four corners of
// max(0, p - (h+v)/2), which is the paper's convolution of the image sampled twice
// as finely, cut at 0 and averaged back; a lone pixel's is p. With N the pixel's
// noise, variance Read + Photon times the median of its 5 x 5 pixels:
//
//   - S is the Laplacian over N, S' = S less the median of S in 5 x 5 pixels, which
//     a slope has too;
//   - F is the fine structure that the optics allow: the larger of M3 - M7(M3), M3 and
//     M7 being medians of 3 x 3 and 7 x 7 pixels of the frame, which is large on
//     narrow lines and stars, and of a quarter of the range of M3 in 3 x 3 pixels. The
//     latter is not in the paper: M3 - M7(M3) vanishes on the flanks of lines and at
//     the ends of the slit, where S' grows with the light's signal to noise without
//     bound. Where one of 5 x 5 pixels is missing and medians are lopsided, it is the
//     whole range in those.
//
// A pixel is struck where S' > Sigmas and S' > Contrast F/N, so are its neighbours
// (8) with S' > Sigmas, and the neighbours of those with S' > Fraction Sigmas. Struck
// pixels get the median of the others in 5 x 5 pixels, and all is repeated, Iterations
// times at most, for what the brighter ones hid.
//
// Pixels beyond the frame, flagged ones and those without a value are left out of
// medians; where a Laplacian lacks a neighbour the opposite one is continued
// linearly, to what is no lower than p. A hit beside one of them has half the S, in a
// corner a quarter.
type EdgeRule struct {
	Sigmas     float64
	Fraction   float64
	Contrast   float64
	Iterations int
}

// DefaultEdgeRule: the Laplacian of noise has a scatter of 1.1 N, so that chance
// exceeds 5.5 sigmas in fewer than 3e-6 of samples, even where few photons make it
// skewed (TestLaplaceFalseAlarms). Half of that next to a hit finds a track's faint
// ends without its neighbours' noise. A contrast of 2 is the paper's for well sampled
// light: S' of lines, stars and ends of the slit with a FWHM of 3 pixels is below 0.4
// F/N, at the frame's edge below F/N (TestLaplaceContrast). Tracks are through after 3 passes.
func DefaultEdgeRule() EdgeRule {
	return EdgeRule{Sigmas: 5.5, Fraction: 0.5, Contrast: 2, Iterations: 4}
}

// reaches, in pixels along either axis.
const (
	fillReach = 2 // of a median of 5 x 5
	// edgeReach is how far S' and F look: S' through S to the median for its noise, F
	// through M7 to M3.
	edgeReach = 4
	growReach = 2 // how far from where it is told a hit spreads
)

// MarginRows is how many rows beyond its own a block needs on either side, where
// the frame has them, so that its hits are those of the whole frame, bit for bit.
func (r EdgeRule) MarginRows() int {
	return r.Iterations * (edgeReach + growReach + fillReach)
}

// FrameNoise is the noise of a frame: the variance of a pixel that expects the
// light m is Read + Photon m.
type FrameNoise struct {
	// Read is the variance without light of each pixel, electrons squared: above 0.
	Read []float32
	// Photon is the variance of one electron's worth of light; 1 for single reads.
	Photon float64
}

// Strike is a struck pixel.
type Strike struct {
	// Pixel is its index into the block.
	Pixel int
	// Value is the median of the pixels around it that are not struck; NaN where all
	// are.
	Value float32
}

// edgeAvoid are the flags of pixels that are not judged.
const edgeAvoid = NoData | Saturated | BadPixel

// Find lists the struck pixels of a block of rows of one frame, in order of Pixel.
// block is in electrons, [row][column] of the given width, without bias, and not
// changed. Pixels with NoData, Saturated or BadPixel and those that are NaN are
// neither judged nor used. The error tells of sizes, of a rule or of a noise that
// make no sense.
func (r EdgeRule) Find(block []float32, width int, noise FrameNoise, flags []Flag) ([]Strike, error) {
	if err := checkBlock(flags, block, width); err != nil {
		return nil, err
	}
	if err := r.check(); err != nil {
		return nil, err
	}
	if err := noise.check(len(block)); err != nil {
		return nil, err
	}
	return newEdgeSearch(r, block, width, noise, flags).run(), nil
}

func (r EdgeRule) check() error {
	if !(r.Sigmas > 0 && r.Fraction > 0 && r.Contrast >= 0 && r.Iterations > 0) {
		return fmt.Errorf("edges: a rule of %v sigmas, fraction %v, contrast %v, %d iterations; all have to be above 0, the contrast at least 0", r.Sigmas, r.Fraction, r.Contrast, r.Iterations)
	}
	return nil
}

func (n FrameNoise) check(pixels int) error {
	if len(n.Read) != pixels || !(n.Photon >= 0) {
		return fmt.Errorf("edges: %d variances for %d pixels, and %v for an electron; give one above 0 for each pixel, and at least 0", len(n.Read), pixels, n.Photon)
	}
	for i, v := range n.Read {
		if !(v > 0) || math.IsInf(float64(v), 0) {
			return fmt.Errorf("edges: pixel %d has the variance %v; give one above 0 for each pixel", i, v)
		}
	}
	return nil
}
