package plan

import (
	"fmt"
	"math"
	"strings"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/sequence"
)

// Altitudes of the sun's centre, degrees, geometric: sunrise and sunset (half a diameter and
// the refraction at the horizon), and the ends of nautical and astronomical twilight
// (Astronomical Almanac, glossary).
const (
	sunUp        = -0.833
	nautical     = -12
	astronomical = -18
)

const (
	// brightMoon is the lit part from which the moon is worth a word (common practice, no
	// source).
	brightMoon = 0.25
	// lookStep is how far apart times are looked at, s: the sky turns by a quarter of a degree.
	lookStep = 60.0
	sidereal = 86164.0905 // s, a turn of the sky
)

// Visibility says whether and when the field can be observed.
type Visibility struct {
	// Observable tells whether the field stands above the horizon, by night, in at least one
	// science exposure; Verdict is one sentence where it is not, or not in all of them.
	Observable bool   `json:"observable"`
	Verdict    string `json:"verdict,omitempty"`
	// TransitUTC is when it culminates nearest to the middle of the science exposures, and
	// TransitAirmass its airmass then, 0 for a field that never rises.
	TransitUTC     string  `json:"transit_utc"`
	TransitAirmass float64 `json:"transit_airmass"`
	// Window is from when to when about that time its airmass is below 2; empty where it
	// never is or always.
	Window [2]string `json:"airmass_below_2_utc"`
	// SunDeg is the sun's greatest altitude in the science exposures, degrees.
	SunDeg float64 `json:"sun_altitude_deg"`
	// AirmassRange is the least and the greatest airmass in the science exposures; 0 where
	// it stands below the horizon.
	AirmassRange [2]float64 `json:"airmass_range"`
	// Moon is about the middle of the science exposures.
	Moon MoonThen `json:"moon"`
}

// MoonThen is the moon during the science exposures.
type MoonThen struct {
	// AltitudeDeg is the greatest altitude, Lit the part of the disc that is lit, AwayDeg the
	// distance to the field, both at the middle.
	AltitudeDeg float64 `json:"altitude_deg"`
	Lit         float64 `json:"lit"`
	AwayDeg     float64 `json:"away_deg"`
}

// watcher looks at the sky of a sequence.
type watcher struct {
	s     *sequence.Sequence
	start time.Time
}

func (w *watcher) at(seconds float64) time.Time {
	return w.start.Add(time.Duration(seconds * float64(time.Second)))
}

// airmass is that of the field, +Inf below the horizon.
func (w *watcher) airmass(seconds float64) float64 {
	t, site := w.s.Target, w.s.Profile.Site
	x := physics.TargetAirmass(t.RADeg, t.DecDeg, w.at(seconds), site.LatitudeDeg, site.LongitudeEastDeg)
	if math.IsNaN(x) {
		return math.Inf(1)
	}
	return x
}

func (w *watcher) sun(seconds float64) float64 {
	site := w.s.Profile.Site
	return physics.SunAltitude(w.at(seconds), site.LatitudeDeg, site.LongitudeEastDeg)
}

// science lists the beginnings, middles and ends of the science exposures, s since the start.
func (w *watcher) science() []float64 {
	var list []float64
	at := 0.0
	for _, st := range w.s.Steps {
		if st.Kind == sequence.Science {
			list = append(list, at, at+st.ExptimeSeconds/2, at+st.ExptimeSeconds)
		}
		at += st.ExptimeSeconds + w.s.Profile.OverheadS()
	}
	return list
}

// look is the visibility of a sequence's field; nil without science exposures.
func look(s *sequence.Sequence) *Visibility {
	start, err := s.Target.Start()
	if err != nil { // a checked target has one
		return nil
	}
	w := &watcher{s, start}
	times := w.science()
	if len(times) == 0 {
		return nil
	}
	v := &Visibility{SunDeg: -90, AirmassRange: [2]float64{math.Inf(1), 0}, Moon: MoonThen{AltitudeDeg: -90}}
	site, t := s.Profile.Site, s.Target
	up, night, both := 0, 0, 0
	for _, at := range times {
		x, sun := w.airmass(at), w.sun(at)
		v.AirmassRange = [2]float64{min(v.AirmassRange[0], x), max(v.AirmassRange[1], x)}
		v.SunDeg = max(v.SunDeg, sun)
		v.Moon.AltitudeDeg = max(v.Moon.AltitudeDeg, physics.MoonAt(w.at(at), site.LatitudeDeg, site.LongitudeEastDeg).AltitudeDeg)
		if !math.IsInf(x, 1) {
			up++
		}
		if sun < sunUp {
			night++
		}
		if !math.IsInf(x, 1) && sun < sunUp {
			both++
		}
	}
	if math.IsInf(v.AirmassRange[1], 1) {
		v.AirmassRange = [2]float64{}
	}
	middle := (times[0] + times[len(times)-1]) / 2
	m := physics.MoonAt(w.at(middle), site.LatitudeDeg, site.LongitudeEastDeg)
	v.Moon.Lit, v.Moon.AwayDeg = m.Lit, physics.Separation(m.RADeg, m.DecDeg, t.RADeg, t.DecDeg)
	w.transit(v, middle)
	v.Observable = both > 0
	v.Verdict = v.words(float64(up)/float64(len(times)), float64(night)/float64(len(times)))
	return v
}

// transit finds the culmination next to a time, and when the airmass is below 2 about it.
func (w *watcher) transit(v *Visibility, middle float64) {
	t := w.s.Target
	hour := physics.TargetHourAngle(t.RADeg, t.DecDeg, w.at(middle), w.s.Profile.Site.LongitudeEastDeg)
	at := middle - hour/360*sidereal
	v.TransitUTC = minutes(w.at(at))
	x := w.airmass(at)
	if math.IsInf(x, 1) {
		return
	}
	v.TransitAirmass = x
	if x >= maxAirmass || w.airmass(at+sidereal/2) < maxAirmass {
		return
	}
	for i, way := range []float64{-1, 1} {
		away := 0.0
		for away < sidereal/2 && w.airmass(at+way*(away+lookStep)) < maxAirmass {
			away += lookStep
		}
		v.Window[i] = minutes(w.at(at + way*away))
	}
}

func minutes(t time.Time) string { return t.UTC().Round(time.Minute).Format("2006-01-02T15:04Z") }

// windowWords say when the field can be seen.
func (v *Visibility) windowWords() string {
	switch {
	case v.TransitAirmass == 0:
		return "it never rises from this site"
	case v.Window[0] != "":
		return fmt.Sprintf("it transits at %s at airmass %.2f, and its airmass is below %d from %s to %s", v.TransitUTC, v.TransitAirmass, maxAirmass, v.Window[0], v.Window[1])
	case v.TransitAirmass < maxAirmass:
		return fmt.Sprintf("it transits at %s at airmass %.2f, and its airmass is always below %d", v.TransitUTC, v.TransitAirmass, maxAirmass)
	}
	return fmt.Sprintf("it transits at %s, at airmass %.2f, and is never better", v.TransitUTC, v.TransitAirmass)
}

// words are the verdict by the parts of the science time in which the field is up and the sun
// is down; "" where nothing is to be said.
func (v *Visibility) words(up, night float64) string {
	cure := "choose another start_utc"
	if v.TransitAirmass == 0 {
		cure = "choose another target or site"
	}
	switch {
	case up == 0:
		return fmt.Sprintf("cannot be observed: the field is below the horizon in all science exposures; %s; %s", v.windowWords(), cure)
	case night == 0:
		return fmt.Sprintf("cannot be observed: the sun is up in all science exposures, as high as %.0f degrees; %s; %s", v.SunDeg, v.windowWords(), cure)
	case !v.Observable:
		return fmt.Sprintf("cannot be observed: the field is below the horizon whenever the sun is down in the science exposures; %s; %s", v.windowWords(), cure)
	}
	var parts []string
	if up < 1 {
		parts = append(parts, fmt.Sprintf("the field is below the horizon in %.0f %% of the science time", max(1, 100*(1-up))))
	}
	if night < 1 {
		parts = append(parts, fmt.Sprintf("the sun is up in %.0f %% of the science time", max(1, 100*(1-night))))
	}
	if len(parts) == 0 {
		return ""
	}
	return strings.Join(parts, " and ") + "; " + v.windowWords() + "; " + cure
}

// String is one line: when the field is best, and the sun and the moon.
func (v *Visibility) String() string {
	moon := "the moon is down"
	if v.Moon.AltitudeDeg > 0 {
		moon = fmt.Sprintf("the moon is up to %.0f degrees high, %.0f %% lit, %.0f degrees away", v.Moon.AltitudeDeg, 100*v.Moon.Lit, v.Moon.AwayDeg)
	}
	return fmt.Sprintf("%s; in the science exposures the sun is at %.0f degrees at most and %s", v.windowWords(), v.SunDeg, moon)
}

// Short is String with times of day alone, for the night sheet.
func (v *Visibility) Short() string {
	clock := func(utc string) string { return utc[len("2006-01-02T") : len(utc)-1] }
	text := "never rises"
	if v.TransitAirmass > 0 {
		text = fmt.Sprintf("transit %s (airmass %.2f)", clock(v.TransitUTC), v.TransitAirmass)
	}
	if v.Window[0] != "" {
		text += fmt.Sprintf(", below %d from %s to %s UTC", maxAirmass, clock(v.Window[0]), clock(v.Window[1]))
	}
	moon := "moon down"
	if v.Moon.AltitudeDeg > 0 {
		moon = fmt.Sprintf("moon to %.0f°, %.0f %% lit, %.0f° away", v.Moon.AltitudeDeg, 100*v.Moon.Lit, v.Moon.AwayDeg)
	}
	return fmt.Sprintf("%s; sun at %.0f° at most, %s", text, v.SunDeg, moon)
}

// warnSky warns of what the sky does to a plan that can be observed.
func (r *Summary) warnSky() {
	v := r.Visibility
	if v == nil {
		return
	}
	if v.Verdict != "" {
		r.warn("%s", v.Verdict)
	} else if v.AirmassRange[1] > maxAirmass {
		r.warn("the field's airmass reaches %.2f during science exposures: %s", v.AirmassRange[1], v.windowWords())
	}
	switch {
	case v.SunDeg >= sunUp: // said
	case v.SunDeg > nautical:
		r.warn("science exposures fall in twilight, the sun %.0f degrees below the horizon at the least: the sky is much brighter than by night; choose another start_utc", -v.SunDeg)
	case v.SunDeg > astronomical:
		r.warn("science exposures fall in the last twilight, the sun %.0f degrees below the horizon at the least: the sky is brighter than by night", -v.SunDeg)
	}
	if m := v.Moon; m.AltitudeDeg > 0 && m.Lit > brightMoon {
		r.warn("the moon is up, at most %.0f degrees high, %.0f %% lit and %.0f degrees from the field: a forecast's sky must have its light", m.AltitudeDeg, 100*m.Lit, m.AwayDeg)
	}
}
