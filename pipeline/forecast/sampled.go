package forecast

import "math"

// sampled is the light of all elements at some of the detector's pixels, those of like places
// standing for each other.
type sampled struct {
	// light is by element and pixel, that of its open mirrors; quiet the read noise's
	// variance, e^2, leak the light of closed mirrors. Light in electrons a second.
	light       [][]float64
	quiet, leak []float64
	// stands is how many of the detector's pixels each stands for.
	stands []float64
}

// Rows and columns sampled: as many rows near sources as elsewhere, so that few stars count by
// what they are; columns a few pixels apart, so that a line of each element falls on some.
const (
	sampledRows    = 8
	sampledColumns = 192
)

// sample samples the light of a candidate's n elements; it is kept.
func (f *fieldLight) sample(n int) *sampled {
	if f.sampled != nil {
		return f.sampled
	}
	l := f.light
	s := &sampled{light: make([][]float64, n)}
	all, one := func(int) bool { return true }, make([]float64, 1)
	columns := min(sampledColumns, l.camera.columns)
	for _, rows := range f.strata() {
		n := min(sampledRows, len(rows))
		for i := range n {
			q := rows[(2*i+1)*len(rows)/(2*n)]
			for k := range columns {
				x := (2*k + 1) * l.camera.columns / (2 * columns)
				for j := range s.light {
					one[0] = 0
					f.element(one, j, q, x, all, false)
					s.light[j] = append(s.light[j], one[0])
				}
				s.quiet = append(s.quiet, l.camera.quiet[l.camera.amplifier(x, q)])
				s.leak = append(s.leak, f.row(q).leak[x])
				s.stands = append(s.stands, float64(len(rows)*l.camera.columns)/float64(n*columns))
			}
		}
	}
	f.sampled = s
	return s
}

// strata are the detector's coded rows within an FWHM of a source's middle, and the others;
// one of the two may be missing.
func (f *fieldLight) strata() [][]int {
	l := f.light
	s, a := l.profile.Spectrograph, l.profile.ArcsecPerU()
	near := make([]bool, l.camera.rows)
	for i := range l.scene.Sources {
		at := &l.scene.Sources[i]
		_, w := l.fieldPlace(at.EastArcsec, at.NorthArcsec)
		reach := l.scene.SeeingFWHMArcsec + at.RadiusArcsec + at.WidthArcsec
		from, to := s.YCenterPx+(w-reach)/a*s.WStepPx, s.YCenterPx+(w+reach)/a*s.WStepPx
		for q := max(0, int(math.Ceil(from))); q <= min(l.camera.rows-1, int(math.Floor(to))); q++ {
			near[q] = true
		}
	}
	var strata [2][]int
	for q, is := range near {
		switch {
		case !f.coded(q):
		case is:
			strata[0] = append(strata[0], q)
		default:
			strata[1] = append(strata[1], q)
		}
	}
	var list [][]int
	for _, rows := range strata {
		if len(rows) > 0 {
			list = append(list, rows)
		}
	}
	return list
}

// coded tells whether the mirrors whose light falls on a trace row's middle follow the code,
// in some element.
func (f *fieldLight) coded(q int) bool {
	s, d := f.light.profile.Spectrograph, f.light.profile.DMD
	w := int(math.Round(f.wMiddle + (float64(q)-s.YCenterPx)/s.WStepPx))
	for u := f.first; u <= f.last; u++ {
		column, row := f.onDevice(float64(u), float64(w))
		if column >= 0 && row >= 0 && column <= float64(d.Columns-1) && row <= float64(d.Rows-1) && !f.shut(u, w) {
			return true
		}
	}
	return false
}
