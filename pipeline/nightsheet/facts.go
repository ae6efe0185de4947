package nightsheet

import (
	"fmt"
	"math"
	"strings"

	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/trade"
)

// where are the facts about target, instrument and pointing.
func (s *Sheet) where() []fact {
	position := func(p Position) string {
		return fmt.Sprintf("RA %s, Dec %s (ICRS; %.6f, %+.6f degrees)", p.RA, p.Dec, p.RADeg, p.DecDeg)
	}
	list := []fact{{"Instrument", s.Profile}, {"Point to", position(s.Telescope)}}
	if p := s.Pointing; p != nil {
		list = append(list, fact{"Field's middle", fmt.Sprintf("%s, %.2f″ from there (by %d stars)", position(s.Center), p.AwayArcsec, p.Stars)})
	}
	list = append(list,
		fact{"Position angle", fmt.Sprintf("%s° (of the slit's direction, north through east)", number(s.Telescope.PositionAngleDeg))},
		fact{"Night", fmt.Sprintf("%s to %s UTC, %s", s.StartUTC, clock(s.EndUTC, s.StartUTC), duration(s.Minutes))})
	air := "the field is below the horizon during science exposures"
	if a := s.Airmass; a[0] > 0 && a[1] > 0 && a[2] > 0 {
		air = fmt.Sprintf("%.2f to %.2f in the science exposures, at most %.2f", a[0], a[1], a[2])
	}
	list = append(list, fact{"Airmass", air})
	if r := s.RefStar; r != nil {
		words := fmt.Sprintf("airmass %.2f to %.2f; %s", r.Airmass[0], r.Airmass[1], r.Name)
		if star := s.sequence.Target.Calibration.RefStar; star != nil {
			at := Position{RADeg: star.RADeg, DecDeg: star.DecDeg}
			at.spell()
			words = fmt.Sprintf("RA %s, Dec %s, %s", at.RA, at.Dec, words)
		}
		list = append(list, fact{"Reference star", words})
	}
	c := s.Code
	code := fmt.Sprintf("%s, v = %d, k = %d; %s, %s order, %d dark columns", c.Family, c.V, c.K, plural(c.Cycles, "cycle"), c.Order, len(c.DarkColumns))
	return append(list, fact{"Code", code},
		fact{"Field", fmt.Sprintf("%s of %s, %.1f × %.1f arcsec", plural(c.Elements, "element"), plural(c.ElementMirrors, "mirror"), s.FieldArcsec[0], s.FieldArcsec[1])})
}

// kindRow is a line of the table of times.
type kindRow struct{ Kind, Steps, Time, Share string }

// times are the lines of the time budget, all last.
func (s *Sheet) times() []kindRow {
	var rows []kindRow
	for _, k := range s.Kinds {
		rows = append(rows, kindRow{string(k.Kind), fmt.Sprint(k.Steps), duration(k.Minutes), fmt.Sprintf("%.1f %%", 100*k.Minutes/math.Max(s.Minutes, 1e-9))})
	}
	return append(rows, kindRow{"all", fmt.Sprint(s.Summary.Steps), duration(s.Minutes), "100 %"})
}

// data is the volume in words.
func (s *Sheet) data() string {
	return fmt.Sprintf("Data: %s frames, %s GB (16 bits a pixel), %s. Reading, and loading masks, is in the times.", fmt.Sprint(s.Summary.Steps), number(s.Gigabytes), plural(s.Loading.Files, "distinct mask"))
}

// limits are the facts about what may go wrong, and where the noise comes from.
func (s *Sheet) limits() []fact {
	list := []fact{{"A cycle", s.cycleWords()}}
	if f := s.Forecast; f != nil {
		list = append(list, fact{"Brightest pixel", brightWords(&f.Saturation)})
	} else {
		list = append(list, fact{"Brightest pixel", "not known without a forecast: look at the first frames"})
	}
	list = append(list, fact{"Lost frames", s.Losses.Verdict})
	if n := shortWords(s.ShortNights); n != "" {
		list = append(list, fact{"A night cut short", n})
	}
	if w := s.noiseWords(); w != "" {
		list = append(list, fact{"Noise", w})
	}
	return list
}

// cycleWords say how long a cycle takes and may.
func (s *Sheet) cycleWords() string {
	if s.Forecast == nil {
		return "what limits its length is not known without a forecast"
	}
	var parts []string
	for _, l := range s.CycleLimits {
		name := map[trade.Rule]string{
			trade.RuleKey: "the target", trade.RuleRefraction: fmt.Sprintf("refraction (at %s nm)", number(l.NM)),
			trade.RuleFlexure: "flexure", trade.RuleSeeing: "seeing",
		}[l.Rule]
		parts = append(parts, fmt.Sprintf("%s %s", name, duration(l.Seconds/60)))
	}
	text := "takes " + duration(s.Forecast.Time.CycleSeconds/60)
	if len(parts) == 0 {
		return text + "; nothing the target says limits it"
	}
	return text + "; at most by " + strings.Join(parts, ", ")
}

func brightWords(at *forecast.Saturation) string {
	from := "the sky"
	if at.Source >= 0 {
		from = fmt.Sprintf("source %d", at.Source)
	}
	share := fmt.Sprintf("%.0f %% of saturation", 100*at.Electrons/at.Limit)
	if at.Saturated() {
		share = number(at.Electrons/at.Limit) + " times saturation"
	}
	text := fmt.Sprintf("%s e of %s, %s; most from %s", number(at.Electrons), number(at.Limit), share, from)
	if at.LongestDwellSeconds > 0 {
		text += fmt.Sprintf("; saturates after %s s", number(at.LongestDwellSeconds))
	}
	return text
}

// shortWords are about the plan's own order.
func shortWords(nights []plan.ShortNight) string {
	for _, n := range nights {
		if !n.Planned {
			continue
		}
		var parts []string
		for _, t := range n.Tails {
			what := "all lost"
			switch {
			case t.Elements == 1:
				what = fmt.Sprintf("noise × %.2f", t.Noise)
			case t.Elements > 0:
				what = fmt.Sprintf("%.0f %% of the elements", 100*t.Elements)
			}
			parts = append(parts, fmt.Sprintf("%.0f %%: %s", 100*t.Fraction, what))
		}
		return "without the last " + strings.Join(parts, "; ")
	}
	return ""
}

// noiseWords say where the noise of the measurement with the least S/N comes from.
func (s *Sheet) noiseWords() string {
	if s.Forecast == nil {
		return ""
	}
	at := -1
	for i, m := range s.Forecast.Wanted {
		if m.Voxels > 0 && m.SNR > 0 && (at < 0 || m.SNR < s.Forecast.Wanted[at].SNR) {
			at = i
		}
	}
	if at < 0 {
		return ""
	}
	v := s.Forecast.Wanted[at].Variance
	var parts []string
	for _, p := range []struct {
		name string
		part float64
	}{{"photons", v.Photons}, {"detector", v.Detector}, {"dark current", v.Dark}, {"leak of closed mirrors", v.Leak}, {"levels", v.Level}, {"transmission", v.Throughput}} {
		if p.part >= 0.005 {
			parts = append(parts, fmt.Sprintf("%s %.0f %%", p.name, 100*p.part))
		}
	}
	return fmt.Sprintf("variance of %s: %s", label(at), strings.Join(parts, ", "))
}

// warnings are all of the plan's and of the device's.
func (s *Sheet) warnings() []string {
	list := append([]string{}, s.Warnings...)
	if s.Device != nil {
		list = append(list, s.Device.Warnings...)
	}
	return list
}
