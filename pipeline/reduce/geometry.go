package reduce

import (
	"mirrorloom/calib"
	"mirrorloom/pipeline/sequence"
)

// nominalGeometry is the profile's own mapping: section 3 of the design.
func nominalGeometry(seq *sequence.Sequence) calib.Geometry {
	s := seq.Profile.Spectrograph
	return calib.Geometry{
		X_c: s.XCenterPx, Y_c: s.YCenterPx,
		X_e: seq.Profile.ElementStepPx(seq.ElementMirrors()), J_c: float64(seq.N()-1) / 2,
		L_c: s.CenterNM, D: s.DispersionPxPerNM,
		SlitTilt: s.SlitTilt, Smile: s.SmilePerPx,
		TraceTilt: s.TraceTilt, TraceCurve: s.TraceCurvePerPx,
	}
}
