package reduce

import (
	"math"

	"mirrorloom/calib"
	"mirrorloom/pipeline/sequence"
)

// nominalGeometry is the profile's own mapping: section 3 of the design, for a field that may
// lie beside the device's middle.
func nominalGeometry(seq *sequence.Sequence) calib.Geometry {
	s := seq.Profile.Spectrograph
	return calib.Geometry{
		X_c: s.XCenterPx, Y_c: s.YCenterPx,
		X_e: seq.Profile.ElementStepPx(seq.ElementMirrors()), J_c: placeOfMiddle(seq),
		L_c: s.CenterNM, D: s.DispersionPxPerNM,
		SlitTilt: s.SlitTilt, Smile: s.SmilePerPx,
		TraceTilt: s.TraceTilt, TraceCurve: s.TraceCurvePerPx,
	}
}

// placeOfMiddle is J_c, the place counted in elements whose light falls on x_c: the field's
// middle less the whole mirrors by which its first strip lies beyond where a field in the
// device's middle begins. It lies beyond 0..n-1 where the field does not reach the middle.
func placeOfMiddle(seq *sequence.Sequence) float64 {
	n, mirrors := seq.N(), seq.ElementMirrors()
	centred := int(math.Ceil(seq.Profile.UCenter() - float64(n*mirrors-1)/2))
	first := seq.Elements[seq.ElementColumns()[0]].First
	return float64(n-1)/2 - float64(first-centred)/float64(mirrors)
}
