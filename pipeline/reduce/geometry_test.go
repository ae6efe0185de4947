package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
)

// The nominal geometry is section 3 of the design, written out here: the light of
// element j at wavelength L lands where it says, on the row the trace really has
// there.
func TestNominalGeometry(t *testing.T) {
	for _, mounting := range []string{instrument.Square, instrument.Diagonal} {
		seq := smallSequence(t, mounting, nil)
		g := nominalGeometry(seq)
		s := seq.Profile.Spectrograph
		for j := range seq.N() {
			e := seq.Elements[seq.ElementColumns()[j]]
			for _, y0 := range []float64{2, 11.7, 21} {
				for _, l := range []float64{-3, 0, 2.5} {
					x := g.X(float64(j), y0, s.CenterNM+l)
					shift := s.TraceTilt*(x-s.XCenterPx) + s.TraceCurvePerPx*(x-s.XCenterPx)*(x-s.XCenterPx)
					q := y0 + shift - s.YCenterPx
					across := s.UStepPx * (float64(e.First+e.Last)/2 - seq.FieldCenterU())
					d := s.DispersionPxPerNM
					want := s.XCenterPx + across + d[0]*l + d[1]*l*l + d[2]*l*l*l + s.SlitTilt*q + s.SmilePerPx*q*q
					require.InDelta(t, want, x, 1e-8)
					require.InDelta(t, shift, g.TraceShift(x), 1e-12)
				}
			}
		}
	}
}
