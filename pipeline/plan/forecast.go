package plan

import (
	"context"
	"fmt"
	"strings"

	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

// addForecast adds what a sequence will give, where its target says what to expect.
func (r *Summary) addForecast(ctx context.Context, s *sequence.Sequence) error {
	if s.Target.Forecast == nil {
		return nil
	}
	light, err := forecast.New(s.Target, s.Profile)
	if err != nil {
		return err
	}
	r.Forecast, err = light.Of(ctx, forecast.CandidateOf(s))
	if err != nil {
		return err
	}
	if at := r.Forecast.Saturation; at.Saturated() {
		r.warn("the brightest pixel (column %d, row %d) will saturate: %.0f e of %.0f, most of it from %s; expose for less than %.3g s", at.Column, at.Row, at.Electrons, at.Limit, sourceWords(at), at.LongestDwellSeconds)
	}
	for _, m := range r.Forecast.Wanted {
		if m.Voxels == 0 {
			r.warn("%s is not seen by this plan: it lies beyond the field, or its wavelengths beyond the detector", m.Name)
		}
	}
	return nil
}

// warnCycle lists what limits a cycle and says where one is longer than what changes in a night allows; of a code that
// was chosen so that it is not, only what the sky's lines do.
func (r *Summary) warnCycle(s *sequence.Sequence, chosen bool) error {
	if r.Forecast == nil {
		return nil
	}
	c, t := r.Forecast.Candidate, r.Forecast.Time
	light, err := forecast.New(s.Target, s.Profile)
	if err != nil {
		return err
	}
	r.CycleLimits = trade.LimitsOf(s.Target, s.Profile, light, c, t.ScienceSeconds)
	limits := []trade.CycleLimit{}
	if !chosen {
		limits = append(limits, trade.LimitOf(s.Target, s.Profile, light, c, t.ScienceSeconds))
	}
	if c.K > 1 {
		limits = append(limits, trade.SkyLimit(s.Target))
	}
	for _, l := range limits {
		if w := l.Warning(t.CycleSeconds); w != "" {
			r.warn("%s", w)
		}
	}
	return nil
}

// sourceWords names what gives most of a pixel's light.
func sourceWords(s forecast.Saturation) string {
	if s.Source < 0 {
		return "the sky"
	}
	return fmt.Sprintf("source %d", s.Source)
}

// forecastText is the forecast as a table, lines ended; empty for none.
func (r *Summary) forecastText() string {
	f := r.Forecast
	if f == nil {
		return ""
	}
	var b strings.Builder
	fmt.Fprintf(&b, "\n%-20s %18s %9s %9s %9s %9s\n", "wanted", "nm", "e", "S/N", "a voxel", "slit scan")
	for i, m := range f.Wanted {
		slit := "-"
		if f.Slit != nil {
			slit = fmt.Sprintf("%.1f", f.Slit.Wanted[i].SNR)
		}
		fmt.Fprintf(&b, "%-20s %8.2f to %6.2f %9.0f %9.1f %9.2f %9s\n", m.Name, m.FromNM, m.ToNM, m.Signal, m.SNR, m.VoxelSNR, slit)
	}
	at := f.Saturation
	fmt.Fprintf(&b, "\nbrightest pixel %.0f e of %.0f, %.0f %% from %s", at.Electrons, at.Limit, 100*at.SourceFraction, sourceWords(at))
	if f.Slit != nil {
		fmt.Fprintf(&b, "; slit scan of %d x %.1f s in the same time", f.Slit.Candidate.N*f.Slit.Candidate.Cycles, f.Slit.Candidate.DwellSeconds)
	}
	b.WriteString("\n\n")
	return b.String()
}
