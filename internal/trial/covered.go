package trial

import (
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Covered tells of a voxel of the cube, by its place in FITS order, whether it
// lies in a coded row and its wavelength falls on the detector. It is worked out
// from section 3 of the design alone, so that the reduction's own count is not
// asked: the whole voxel must lie between the outer edges of the first and last
// pixel, both along x and along the trace's rows.
func Covered(seq *sequence.Sequence) func(i int) bool {
	p := seq.Profile
	n, rows := seq.N(), p.Detector.Rows
	open := make([]bool, rows)
	for y := range open {
		open[y] = codedRow(seq, float64(y))
	}
	return func(i int) bool {
		j, y, l := i%n, i/n%rows, i/n/rows
		if !open[y] {
			return false
		}
		for _, edge := range []float64{-0.5, 0.5} {
			x := columnOf(p, float64(seq.Target.OffsetU())+float64(seq.ElementMirrors())*(float64(j)-float64(n-1)/2), float64(y), p.Grid.WavelengthNM(float64(l)+edge))
			row := float64(y) + traceOf(p, x)
			if x < -0.5 || x > float64(p.Detector.Columns)-0.5 || row < 0 || row > float64(rows-1) {
				return false
			}
		}
		return true
	}
}

// codedRow tells whether the mirror row at the middle of a detector row is there
// and follows the code. Rows closed for one element alone are not known here.
func codedRow(seq *sequence.Sequence, y float64) bool {
	s := seq.Profile.Spectrograph
	w := seq.Profile.WCenter() + (y-s.YCenterPx)/s.WStepPx
	for _, r := range seq.Rows {
		if r.Use == sequence.UseCoded && w >= float64(r.First)-0.5 && w < float64(r.Last)+0.5 {
			return true
		}
	}
	return false
}

func traceOf(p *instrument.Profile, x float64) float64 {
	s := p.Spectrograph
	d := x - s.XCenterPx
	return s.TraceTilt*d + s.TraceCurvePerPx*d*d
}

// columnOf solves x = x_c + u_step across + d1 l + d2 l^2 + d3 l^3 + slit_tilt q +
// smile q^2 with q the row that the trace really has at x, for an element so many mirrors
// across from the middle.
func columnOf(p *instrument.Profile, across, y, nm float64) float64 {
	s := p.Spectrograph
	l := nm - s.CenterNM
	d := s.DispersionPxPerNM
	straight := s.XCenterPx + s.UStepPx*across + d[0]*l + d[1]*l*l + d[2]*l*l*l
	x := straight
	for range 20 { // each pass gains the product of the slopes, less than 0.1
		q := y + traceOf(p, x) - s.YCenterPx
		x = straight + s.SlitTilt*q + s.SmilePerPx*q*q
	}
	return x
}
