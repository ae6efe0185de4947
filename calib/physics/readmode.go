package physics

import (
	"fmt"
	"math"
)

// ReadMode is how an infrared array is read without destroying the charge. An empty
// Kind is a single read.
type ReadMode struct {
	Kind ReadKind
	// Reads is: for Fowler, the reads averaged at each end; for Ramp, all reads,
	// equally spaced, to which a straight line is fitted.
	Reads int
	// Spacing is the time between reads of a Fowler group, in units of the time
	// between the first read of the first group and the first of the second.
	Spacing float64
}

// ReadKind names a mode.
type ReadKind string

// The modes. Double is the difference of two reads.
const (
	SingleRead ReadKind = "single"
	DoubleRead ReadKind = "double"
	FowlerRead ReadKind = "fowler"
	RampRead   ReadKind = "ramp"
)

// EffectiveNoise is a mode's effective noise (Fowler and Gatley 1990, Astrophysical Journal
// 353, L33; Garnett and Forrest 1993, Proceedings of SPIE 1946, 395):
//
//	variance of the charge collected = Read (noise of one read)^2 + Photon (charge)
//
//	single          Read 1                         Photon 1
//	double          Read 2                         Photon 1
//	fowler, m       Read 2/m                       Photon 1 - s (m^2-1)/(3 m), s = Spacing
//	ramp, n reads   Read 12 (n-1)/(n (n+1))        Photon 6 (n^2+1)/(5 n (n+1))
//
// The charge is that between the first reads of the two groups, or between the
// first and the last read of the ramp. A Photon unlike 1 makes the variance of the
// charge unlike the charge: shared photons are counted in several reads.
type EffectiveNoise struct{ Read, Photon float64 }

// Noise of the mode; an error for numbers of reads that it does not have.
func (m ReadMode) Noise() (EffectiveNoise, error) {
	n := float64(m.Reads)
	switch m.Kind {
	case SingleRead, "":
		return EffectiveNoise{Read: 1, Photon: 1}, nil
	case DoubleRead:
		return EffectiveNoise{Read: 2, Photon: 1}, nil
	case FowlerRead:
		if m.Reads < 1 || !(m.Spacing >= 0) || m.Spacing*n > 1 {
			return EffectiveNoise{}, fmt.Errorf("read mode fowler: %d reads %g of the exposure apart do not fit before the second group; check reads and spacing", m.Reads, m.Spacing)
		}
		return EffectiveNoise{Read: 2 / n, Photon: 1 - m.Spacing*(n*n-1)/(3*n)}, nil
	case RampRead:
		if m.Reads < 2 {
			return EffectiveNoise{}, fmt.Errorf("read mode ramp: %d reads make no line; give 2 or more", m.Reads)
		}
		return EffectiveNoise{Read: 12 * (n - 1) / (n * (n + 1)), Photon: 6 * (n*n + 1) / (5 * n * (n + 1))}, nil
	}
	return EffectiveNoise{}, fmt.Errorf("read mode %q is unknown; use %s, %s, %s or %s", m.Kind, SingleRead, DoubleRead, FowlerRead, RampRead)
}

// EffectiveReadNoise is the read noise of the whole exposure for readNoiseE electrons
// a read.
func (m ReadMode) EffectiveReadNoise(readNoiseE float64) (float64, error) {
	noise, err := m.Noise()
	return readNoiseE * math.Sqrt(noise.Read), err
}
