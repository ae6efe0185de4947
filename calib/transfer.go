package calib

import (
	"fmt"
	"math"
)

// Pair is two exposures of the same scene through one amplifier: raw values above the
// bias level, in ADU, rows of Width one after the other, linearised. Pixels with any
// bit of Flags are left out; nil flags none.
type Pair struct {
	A, B  []float32
	Flags []Flag
	Width int
	// Dark marks biases: m is 0 in them, whatever their levels, which a tenth of an ADU
	// off would look like light.
	Dark bool
}

// Transfer is an amplifier's gain and read noise with their standard errors.
type Transfer struct {
	Gain, GainError           float64 // electrons per ADU
	ReadNoise, ReadNoiseError float64 // electrons
	Pixels, Clipped           int
	// Chi2 per degree of freedom of the variances in groups of like light about the
	// straight line: above 1, the detector is not linear or the lamp not steady.
	Chi2 float64
}

// TransferRule is the photon transfer of pairs (Janesick, Klaasen and Elliott 1987,
// Optical Engineering 26, 972): half the variance of A - B is
//
//	v(m) = r + m/gain,   r = (read noise/gain)^2 + 1/12,   m = (A + B)/2 in ADU,
//
// in which the pixels' own responses cancel. r and 1/gain maximise the likelihood of
// the squared differences of all pixels, each of one degree of freedom (by
// reweighting, Wedderburn 1974, Biometrika 61, 439), of those within Clip sigmas.
type TransferRule struct {
	Clip float64
}

// DefaultTransferRule keeps differences within 4 sigmas.
func DefaultTransferRule() TransferRule { return TransferRule{Clip: 4} }

// minPixels of pairs fix a gain to a few per cent.
const minPixels = 1000

// Measure fits the pairs of one amplifier: flats, and biases, without which the read
// noise is an extrapolation. What the frames of a pair differ by in level (biases) or in
// proportion to the light (flats) is taken out, and struck pixels are left out. An
// error wraps ErrNoLight where the pairs do not fix a gain.
func (r TransferRule) Measure(pairs []Pair) (Transfer, error) {
	var samples []transferSample
	for i, p := range pairs {
		if p.Width < 2 || len(p.A)%p.Width != 0 || len(p.B) != len(p.A) || (p.Flags != nil && len(p.Flags) != len(p.A)) {
			return Transfer{}, fmt.Errorf("photon transfer: pair %d has %d and %d pixels, not the same whole rows of %d", i+1, len(p.A), len(p.B), p.Width)
		}
		samples = p.samples(samples)
	}
	if len(samples) < minPixels {
		return Transfer{}, fmt.Errorf("photon transfer: %w: %d good pixels; %d are the least", ErrNoLight, len(samples), minPixels)
	}
	line := startLine(samples)
	var sums transferSums
	for range 20 {
		sums = r.sums(samples, line)
		next, ok := sums.solve()
		if !ok {
			return Transfer{}, fmt.Errorf("photon transfer: %w: the pairs hold one level of light only; add pairs of biases and of flats", ErrNoLight)
		}
		settled := math.Abs(next.slope-line.slope) <= 1e-6*math.Abs(next.slope) && math.Abs(next.level-line.level) <= 1e-6*math.Abs(next.level)
		line = next
		if settled {
			break
		}
	}
	if slopeError := math.Sqrt(sums.w / sums.determinant()); !(line.slope > 5*slopeError) {
		return Transfer{}, fmt.Errorf("photon transfer: %w: the variance does not grow with the light; add pairs of flats", ErrNoLight)
	}
	return line.transfer(sums, samples), nil
}
