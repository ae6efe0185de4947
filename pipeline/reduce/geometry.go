package reduce

import (
	"mirrorloom/calib"
	"mirrorloom/pipeline/sequence"
)

// nominalGeometry is the profile's own mapping: light of the device's middle falls on x_c,
// so that J_c, the place there counted in elements, is the field's middle only where the field
// lies in the device's.
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

// placeOfMiddle is the place of the device's middle counted in elements: 0 in the middle of
// the first element's strip, and beyond 0..n-1 where the field lies beside it.
func placeOfMiddle(seq *sequence.Sequence) float64 {
	mirrors := float64(seq.ElementMirrors())
	first := float64(seq.Elements[seq.ElementColumns()[0]].First) + (mirrors-1)/2
	return (seq.Profile.UCenter() - first) / mirrors
}
