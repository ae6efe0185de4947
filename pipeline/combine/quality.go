package combine

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/product"
)

// quality is that of the combined cube where it was counted, and else what the runs'
// figures come to.
func (c *combination) quality() product.Quality {
	total := float64(c.schema.Elements) * float64(c.schema.Rows) * float64(c.schema.Grid.Count)
	q := product.Quality{GoodFraction: float64(c.stream.good) / total, ResidualLight: c.members[0].run.Quality.ResidualLight}
	runs := float64(len(c.members))
	chi2, wave, hits, known := 0.0, 0.0, 0, true
	for _, m := range c.members {
		r := m.run.Quality
		q.CoveredGoodFraction += r.CoveredGoodFraction / runs
		q.DoubtfulPixels += r.DoubtfulPixels
		q.Restored += r.Restored
		q.Lost += r.Lost
		q.Saturated += r.Saturated
		q.BadPixels = max(q.BadPixels, r.BadPixels)
		if r.ResidualLight != q.ResidualLight {
			q.ResidualLight = several
		}
		chi2 += known64(r.DarkChi2Heldout) / runs
		wave = max(wave, known64(r.WavelengthRMSPx))
		if math.IsNaN(wave) || math.IsNaN(known64(r.WavelengthRMSPx)) {
			wave = math.NaN()
		}
		if r.Hits == nil {
			known = false
		} else {
			hits += *r.Hits
		}
	}
	q.DarkChi2Heldout, q.WavelengthRMSPx = number(chi2), number(wave)
	if known {
		q.Hits = &hits
	}
	return q
}

// known64 is not a number for nil.
func known64(x *float64) float64 {
	if x == nil {
		return math.NaN()
	}
	return *x
}

// degraded says why the cube is not whole: what its own voxels lack, and runs that were
// not whole themselves.
func (c *combination) degraded() []string {
	var all []string
	for _, f := range product.Flags() {
		if f.Bit&(product.FlagSaturated|product.FlagLost|product.FlagNominalWave) == 0 {
			continue
		}
		if n := c.stream.flagged[bit(f.Bit)]; n > 0 {
			all = append(all, fmt.Sprintf("%d voxels are %s in every run that has light of them", n, f.Name))
		}
	}
	for _, m := range c.members {
		if m.run.Exit != 0 {
			all = append(all, fmt.Sprintf("%s is not whole itself (exit code %d): its report says why", m.name, m.run.Exit))
		}
	}
	return all
}

// bit is the place of a flag's bit.
func bit(flag int16) int { return int(math.Round(math.Log2(float64(flag)))) }

// Beyond these a run's light is said to differ from that of the first.
const (
	lightSigmas = 5
	lightPart   = 0.03
	// darkSlack is by how much the dark columns' chi-square may exceed 1: errors then are 3 %
	// too small, as much as a clean night is allowed.
	darkSlack = 0.06
)

// warnings are what a user should know before trusting the mean of the runs.
func (c *combination) warnings() []string {
	var all []string
	for i, r := range c.list[1:] {
		if d := math.Abs(r.Light - 1); r.LightErr > 0 && d > lightPart && d > lightSigmas*r.LightErr {
			all = append(all, fmt.Sprintf("%s has %.3f ± %.3f times the light of %s where both are good: clouds, another sky or another seeing; the mean is between the two, unless sky and flux are calibrated first",
				c.members[i+1].name, r.Light, r.LightErr, c.members[0].name))
		}
	}
	for _, m := range c.members {
		for _, text := range m.run.Warnings {
			all = append(all, fmt.Sprintf("of %s: %s", m.name, text))
		}
		if chi2 := m.run.Quality.DarkChi2Heldout; chi2 != nil && *chi2 > 1+darkSlack {
			all = append(all, fmt.Sprintf("of %s: its dark columns show %.2f times the squares that its errors allow; look at its report before you trust the mean", m.name, *chi2))
		}
	}
	for i, m := range c.members {
		for _, other := range c.members[:i] {
			if m.card("SEQSHA") != "" && m.card("SEQSHA") == other.card("SEQSHA") && setting(m, "night") == setting(other, "night") && m.began() == other.began() {
				all = append(all, fmt.Sprintf("%s and %s were both reduced from a night named %q: what frames they share, of lamps and detector at least, counts twice, and VARIANCE takes its noise for independent", other.name, m.name, setting(m, "night")))
			}
		}
		if p := m.card("PROFSHA"); p != c.members[0].card("PROFSHA") {
			all = append(all, fmt.Sprintf("the profiles of %s and %s have the same name and differ", c.members[0].name, m.name))
		}
	}
	return all
}

// setting is a text of the run's settings.
func setting(m *member, key string) string {
	text, _ := m.run.Settings[key].(string)
	return text
}

// began is the first date of the ledger.
func (m *member) began() string {
	for _, e := range m.ledger {
		if e.DateObs != "" {
			return e.DateObs
		}
	}
	return ""
}
