package forecast

import "math"

// Brightest is the brightest pixel of a candidate's coded frames.
func (l *Light) Brightest(c Candidate) (Saturation, error) {
	c, err := l.resolved(c)
	if err != nil {
		return Saturation{}, err
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.saturation(l.field(c, l.sightOf(l.Time(c))), c), nil
}

// Ruled is how far the photon noise of a source rules the other elements of its rows: the
// variance that its light adds to an element without light of its own, over all other
// variance there, in the mean over the columns of the worst row. At 1 it doubles the variance.
// 0 for a source that lights no row, and for a slit scan.
func (l *Light) Ruled(c Candidate, source int) (float64, error) {
	c, err := l.resolved(c)
	if err != nil {
		return 0, err
	}
	if source < 0 || source >= len(l.scene.Sources) {
		return 0, nil
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	f := l.field(c, l.sightOf(l.Time(c)))
	s, at := l.profile.Spectrograph, &l.scene.Sources[source]
	_, w := l.fieldPlace(at.EastArcsec, at.NorthArcsec)
	perArcsec := s.WStepPx / l.profile.ArcsecPerU()
	reach := ruledSeeings * (l.scene.SeeingFWHMArcsec + at.RadiusArcsec + at.WidthArcsec)
	from := max(0, int(math.Floor(s.YCenterPx+(w-reach)*perArcsec)))
	to := min(l.camera.rows-1, int(math.Ceil(s.YCenterPx+(w+reach)*perArcsec)))
	worst := 0.0
	for q := from; q <= to; q++ {
		worst = max(worst, f.ruledRow(c, source, q))
	}
	return worst, nil
}

// ruledSeeings is how far from a source its rows are looked at, in FWHM of its image: what
// closed mirrors leave of a bright star lies beyond them.
const ruledSeeings = 5

func (f *fieldLight) ruledRow(c Candidate, source, q int) float64 {
	l, d, r := f.light, c.Design(), f.row(q)
	own := make([]float64, len(r.overlap))
	for i, s := range f.sharesOf(q) {
		if p := f.pieces[i]; p.source == source {
			f.addShare(own, r.xi, p.still, s)
			f.addMoving(own, r.xi, p, s, q)
		}
	}
	photons := l.camera.photon * d.PhotonVariance(0, 1) * c.DwellSeconds
	read, sum := d.ReadNoiseVariance(), 0.0
	for x, e := range own {
		quiet := l.camera.quiet[l.camera.amplifier(x, q)]
		others := photons*max(0, r.overlap[x]-e) + read*(quiet+l.camera.photon*(l.camera.darkEPS+r.leak[x])*c.DwellSeconds)
		sum += photons * e / others
	}
	return sum / float64(len(own))
}
