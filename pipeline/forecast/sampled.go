package forecast

import "math"

// Sampled is the light of all elements at some of the detector's pixels.
type Sampled struct {
	// Light is by element and pixel, electrons a frame; Quiet is the variance of a sample but
	// for the light that is open, e^2, Photon that of an electron.
	Light  [][]float64
	Quiet  []float64
	Photon float64
	// Stands is how many of the detector's pixels each stands for.
	Stands []float64
}

// Rows and columns sampled: as many rows near sources as elsewhere, so that few stars count by
// what they are.
const (
	sampledRows    = 8
	sampledColumns = 64
)

// Sampled samples a candidate's frames.
func (l *Light) Sampled(c Candidate) (*Sampled, error) {
	c, err := l.resolved(c)
	if err != nil {
		return nil, err
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	f := l.field(c, l.sightOf(l.Time(c)))
	out := &Sampled{Light: make([][]float64, c.N), Photon: l.camera.photon}
	all, one := func(int) bool { return true }, make([]float64, 1)
	for _, rows := range l.strata() {
		n := min(sampledRows, len(rows))
		for i := range n {
			q := rows[(2*i+1)*len(rows)/(2*n)]
			columns := min(sampledColumns, l.camera.columns)
			for k := range columns {
				x := (2*k + 1) * l.camera.columns / (2 * columns)
				for j := range out.Light {
					one[0] = 0
					f.element(one, j, q, x, all, false)
					out.Light[j] = append(out.Light[j], one[0]*c.DwellSeconds)
				}
				quiet := l.camera.quiet[l.camera.amplifier(x, q)]
				out.Quiet = append(out.Quiet, quiet+l.camera.photon*(l.camera.darkEPS+f.row(q).leak[x])*c.DwellSeconds)
				out.Stands = append(out.Stands, float64(len(rows)*l.camera.columns)/float64(n*columns))
			}
		}
	}
	return out, nil
}

// strata are the detector's rows within an FWHM of a source's middle, and the others; one of
// the two may be missing.
func (l *Light) strata() [][]int {
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
		if is {
			strata[0] = append(strata[0], q)
		} else {
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
