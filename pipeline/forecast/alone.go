package forecast

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/scene"
)

// Alone is a star in rows of mirrors that show one element all the time: sentinel rows.
type Alone struct {
	Source int `json:"source"`
	// Element is the one that holds most of the star's light; -1 for a star beyond the field.
	Element int `json:"element"`
	// First and Last are the rows of mirrors, w: one FWHM of the seeing to both sides of the
	// star, and one and a half line widths of rows that light from beyond them reaches; fewer
	// where the device ends or the target has another use for rows.
	First, Last int
	// Held is the part of the star's light that the element holds, Best that of an element
	// with the star in its middle.
	Held float64 `json:"held"`
	Best float64 `json:"best"`
	// SNR is that of the star's light in one frame, from all pixels of the rows that light
	// from beyond does not reach. The sky's light is noise here: it would fade as the star's
	// does, but seeing and moon change it besides.
	SNR float64 `json:"snr"`
	// Full is the brightest pixel of a frame over its saturation.
	Full float64 `json:"full"`
	// Open tells whether the star itself stands in rows of device and detector that have no
	// other use.
	Open bool `json:"open"`
	// Wanted is the measurement whose rows they are, "" for none.
	Wanted string `json:"wanted,omitempty"`
}

// Alone is what a star gives in sentinel rows of a candidate's elements. The error is about
// what is no candidate, or no star.
func (l *Light) Alone(c Candidate, source int) (Alone, error) {
	c, err := l.resolved(c)
	if err != nil {
		return Alone{}, err
	}
	if source < 0 || source >= len(l.scene.Sources) || l.scene.Sources[source].Kind != scene.KindStar {
		return Alone{}, fmt.Errorf("source %d is no star of the forecast", source)
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	s := &l.scene.Sources[source]
	p, a := l.profile, l.profile.ArcsecPerU()
	u, w := l.fieldPlace(s.EastArcsec, s.NorthArcsec)
	step, sigma := a*float64(c.ElementMirrors), l.scene.SeeingFWHMArcsec/fwhmPerSigma
	at := u/step + float64(c.N-1)/2
	j := int(math.Round(at))
	out := Alone{Source: source, Element: -1}
	if j < 0 || j >= c.N {
		return out, nil
	}
	out.Element = j
	off := (at - float64(j)) * step
	out.Held, out.Best = between(-step/2-off, step/2-off, sigma), between(-step/2, step/2, sigma)
	edge := 1.5 * p.Spectrograph.LSFFWHMPx
	half := l.scene.SeeingFWHMArcsec/a + edge/p.Spectrograph.WStepPx
	middle := p.WCenter() + w/a
	out.First, out.Last = l.openAbout(int(math.Round(middle)), int(math.Floor(middle-half)), int(math.Ceil(middle+half)), j)
	row := p.Spectrograph.YCenterPx + w/a*p.Spectrograph.WStepPx
	out.Open = out.First <= out.Last && row >= 0 && row <= float64(l.camera.rows-1)
	if !out.Open {
		return out, nil
	}
	out.Wanted = l.wantedIn(out.First, out.Last)
	l.expose(&out, l.field(c, l.sightOf(l.Time(c))), c.DwellSeconds, edge)
	return out, nil
}

// openAbout is the part of rows first..last about the one in the middle that is on the device
// and that the target has no other use for; first > last for none.
func (l *Light) openAbout(middle, first, last, j int) (int, int) {
	wFirst, wLast := l.profile.WRange()
	open := func(w int) bool { return w >= wFirst && w <= wLast && !l.taken(w, j) }
	if !open(middle) {
		return 0, -1
	}
	from, to := middle, middle
	for from > first && open(from-1) {
		from--
	}
	for to < last && open(to+1) {
		to++
	}
	return from, to
}

// expose fills in SNR and Full; edge are the detector rows at both ends that light from beyond
// reaches (at most a third of all, as reduce cuts them).
func (l *Light) expose(out *Alone, f *fieldLight, dwell, edge float64) {
	s := l.profile.Spectrograph
	row := func(w float64) float64 { return s.YCenterPx + s.WStepPx*(w-l.profile.WCenter()) }
	low, high := row(float64(out.First)-0.5), row(float64(out.Last)+0.5)
	edge = min(edge, (high-low)/3)
	light, star, square := make([]float64, l.camera.columns), make([]float64, l.camera.columns), 0.0
	for q := max(0, int(math.Ceil(low))); q <= min(l.camera.rows-1, int(math.Floor(high))); q++ {
		clear(light)
		clear(star)
		f.element(light, out.Element, q, 0, func(int) bool { return true }, false)
		f.element(star, out.Element, q, 0, func(source int) bool { return source == out.Source }, false)
		inside := float64(q) >= low+edge && float64(q) <= high-edge
		for x, e := range light {
			amplifier := l.camera.amplifier(x, q)
			e *= dwell
			dark := l.camera.darkEPS * dwell
			out.Full = max(out.Full, (e+dark)/l.camera.full[amplifier])
			if inside {
				square += star[x] * star[x] * dwell * dwell / (l.camera.quiet[amplifier] + l.camera.photon*(e+dark))
			}
		}
	}
	out.SNR = math.Sqrt(square)
}

// wantedIn is the first measurement that has light in rows of mirrors, "" for none.
func (l *Light) wantedIn(first, last int) string {
	a := l.profile.ArcsecPerU()
	for _, m := range l.target.Forecast.Wanted {
		var w, reach float64
		if m.Source != nil {
			s := &l.scene.Sources[*m.Source]
			_, w = l.fieldPlace(s.EastArcsec, s.NorthArcsec)
			reach = s.RadiusArcsec + s.WidthArcsec + l.scene.SeeingFWHMArcsec
		} else {
			_, w = l.fieldPlace(*m.EastArcsec, *m.NorthArcsec)
		}
		if m.RadiusArcsec != nil {
			reach = *m.RadiusArcsec
		}
		middle := l.profile.WCenter() + w/a
		if middle+reach/a >= float64(first) && middle-reach/a <= float64(last) {
			return m.Name
		}
	}
	return ""
}
