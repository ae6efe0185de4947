package plan

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/register"
	"mirrorloom/pipeline/sequence"
)

// PointingTo is what the telescope is to be asked for.
type PointingTo struct {
	RADeg     float64 `json:"ra_deg"`
	DecDeg    float64 `json:"dec_deg"`
	RotangDeg float64 `json:"rotang_deg"`
	// Stars are those behind the registration, AwayArcsec how far the telescope points
	// from the field.
	Stars      int     `json:"stars"`
	AwayArcsec float64 `json:"away_arcsec"`
}

// readRegistration reads a registration of the profile's instrument and gives the profile
// the scale and the parity that it measured; nil without a path.
func readRegistration(path string, profile *instrument.Profile) (*register.Registration, error) {
	if path == "" {
		return nil, nil
	}
	r, err := register.Read(path)
	if err != nil {
		return nil, err
	}
	if r.Profile != profile.Name {
		return nil, fmt.Errorf("%s is of the instrument %q, not %q; give the registration of this one", path, r.Profile, profile.Name)
	}
	profile.DMD.ArcsecPerMirror *= r.Scale
	profile.DMD.Parity = r.Parity
	return r, nil
}

// pointingOf is where to send the telescope for a sequence.
func pointingOf(r *register.Registration, s *sequence.Sequence) *PointingTo {
	first, last := math.MaxInt, math.MinInt
	for _, e := range s.Elements {
		if !e.Dark {
			first, last = min(first, e.First), max(last, e.Last)
		}
	}
	t := s.Target
	middle := (float64(first+last)/2 - s.Profile.UCenter()) * s.Profile.ArcsecPerU()
	p := &PointingTo{Stars: r.Stars, AwayArcsec: math.Hypot(r.OffsetUArcsec+middle, r.OffsetWArcsec)}
	p.RADeg, p.DecDeg, p.RotangDeg = r.Pointed(t.RADeg, t.DecDeg, t.RotangDeg, middle)
	return p
}
