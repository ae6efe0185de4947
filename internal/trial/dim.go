package trial

import "math"

// Dim makes all light of the field's scene fainter by so many magnitudes.
func (f *Field) Dim(mag float64) {
	factor := math.Pow(10, -0.4*mag)
	fainter := func(m *float64) *float64 {
		if m == nil {
			return nil
		}
		x := *m + mag
		return &x
	}
	for i := range f.Scene.Sources {
		s := &f.Scene.Sources[i]
		s.ABMag = fainter(s.ABMag)
		for j := range s.Lines {
			s.Lines[j].FluxWM2 *= factor
		}
	}
	f.Scene.Sky.ContinuumABArcsec2 = fainter(f.Scene.Sky.ContinuumABArcsec2)
	for j := range f.Scene.Sky.Lines {
		f.Scene.Sky.Lines[j].FluxWM2Arcsec2 *= factor
	}
}
