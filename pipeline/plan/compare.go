package plan

import (
	"context"
	"errors"
	"fmt"
	"os"
	"strings"

	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Side is one of two plans that are compared.
type Side struct {
	// Name is the folder of a sequence, or the target's file.
	Name    string `json:"name"`
	Profile string `json:"profile"`
	// Candidate is its code, elements, dwell and cycles; Order that of its steps.
	Candidate forecast.Candidate `json:"candidate"`
	Order     string             `json:"order"`
	Steps     int                `json:"steps"`
	Minutes   float64            `json:"minutes"`
	// ReadNoiseGain is as in a Summary.
	ReadNoiseGain float64 `json:"read_noise_gain"`
	// Forecast is nil where the target does not say what to expect.
	Forecast *forecast.Result `json:"forecast,omitempty"`
	aim      string
}

// Comparison is two plans side by side.
type Comparison struct {
	A Side `json:"a"`
	B Side `json:"b"`
	// SNR is, for the measurements of the same name, B's S/N over A's.
	SNR []NamedRatio `json:"snr_b_over_a"`
	// Minutes is B's time over A's.
	Minutes float64 `json:"minutes_b_over_a"`
	// Verdict is one sentence.
	Verdict string `json:"verdict"`
}

// NamedRatio is B over A of a measurement.
type NamedRatio struct {
	Name  string  `json:"name"`
	Ratio float64 `json:"ratio"`
}

// Compare holds two plans against each other, each a sequence's folder or a target (a file or
// the name of an embedded one), which is planned with the profile and not written.
func Compare(ctx context.Context, a, b, profile string) (*Comparison, error) {
	var c Comparison
	for _, x := range []struct {
		name string
		side *Side
	}{{a, &c.A}, {b, &c.B}} {
		side, err := sideOf(ctx, x.name, profile)
		if err != nil {
			return nil, err
		}
		*x.side = *side
	}
	c.Minutes = c.B.Minutes / c.A.Minutes
	c.SNR = []NamedRatio{}
	if c.A.Forecast != nil && c.B.Forecast != nil {
		for _, m := range c.A.Forecast.Wanted {
			for _, o := range c.B.Forecast.Wanted {
				if m.Name == o.Name && m.SNR > 0 {
					c.SNR = append(c.SNR, NamedRatio{m.Name, o.SNR / m.SNR})
				}
			}
		}
	}
	c.Verdict = c.verdict()
	return &c, nil
}

// sideOf reads or makes a plan.
func sideOf(ctx context.Context, name, profile string) (*Side, error) {
	if info, err := os.Stat(name); err == nil && info.IsDir() {
		s, err := sequence.Read(ctx, name)
		if err != nil {
			return nil, err
		}
		return newSide(ctx, name, s)
	}
	if profile == "" {
		return nil, fmt.Errorf("%s is no folder of a sequence, and a target takes a profile to be compared; give --profile", name)
	}
	p, err := instrument.Load(profile)
	if err != nil {
		return nil, err
	}
	target, err := sequence.LoadTarget(name)
	if err != nil {
		return nil, err
	}
	s, _, err := Build(ctx, target, p)
	if err != nil {
		var c *config.Error
		if errors.As(err, &c) && c.File == "" {
			c.File = name
		}
		return nil, err
	}
	return newSide(ctx, name, s)
}

func newSide(ctx context.Context, name string, s *sequence.Sequence) (*Side, error) {
	side := &Side{Name: name, Profile: s.Profile.Name, Candidate: forecast.CandidateOf(s), Order: s.Target.Code.Order, Steps: len(s.Steps)}
	for _, st := range s.Steps {
		side.Minutes += (st.ExptimeSeconds + s.Profile.OverheadS()) / 60
	}
	if d := side.Candidate.Design(); d.K > 1 {
		side.ReadNoiseGain = d.ReadNoiseGainDark(s.N())
	}
	if s.Target.Forecast == nil {
		return side, nil
	}
	light, err := forecast.New(s.Target, s.Profile)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	side.aim = s.Target.Forecast.Aim
	side.Forecast, err = light.Of(ctx, side.Candidate)
	return side, err
}

// verdict tells the better by A's aim, where both say what to expect.
func (c *Comparison) verdict() string {
	if c.A.Forecast == nil || c.B.Forecast == nil || len(c.SNR) == 0 {
		return fmt.Sprintf("B takes %.2f times as long as A; their targets do not both say what S/N is wanted.", c.Minutes)
	}
	a, b := forecast.Figure(c.A.aim, c.A.Forecast.Wanted), forecast.Figure(c.A.aim, c.B.Forecast.Wanted)
	text := fmt.Sprintf("B gives %.2f times the S/N of A by A's aim (%s) in %.2f times the time", b/a, c.A.aim, c.Minutes)
	for _, x := range []struct {
		name string
		side *Side
	}{{"A", &c.A}, {"B", &c.B}} {
		if x.side.Forecast.Saturation.Saturated() {
			text += "; " + x.name + " saturates"
		}
	}
	return text + "."
}

// String is the comparison as a table, lines ended.
func (c *Comparison) String() string {
	var b strings.Builder
	row := func(what, x, y string) { fmt.Fprintf(&b, "%-22s %26s %26s\n", what, x, y) }
	of := func(what, format string, get func(*Side) any) {
		row(what, fmt.Sprintf(format, get(&c.A)), fmt.Sprintf(format, get(&c.B)))
	}
	row("", "A", "B")
	of("plan", "%v", func(s *Side) any { return s.Name })
	of("profile", "%v", func(s *Side) any { return s.Profile })
	of("family", "%v", func(s *Side) any { return s.Candidate.Family })
	of("v", "%d", func(s *Side) any { return s.Candidate.V })
	of("k", "%d", func(s *Side) any { return s.Candidate.K })
	of("elements", "%d", func(s *Side) any { return s.Candidate.N })
	of("mirrors an element", "%d", func(s *Side) any { return s.Candidate.ElementMirrors })
	of("dark columns", "%d", func(s *Side) any { return s.Candidate.Dark })
	of("order", "%v", func(s *Side) any { return s.Order })
	of("cycles", "%d", func(s *Side) any { return s.Candidate.Cycles })
	of("dwell, s", "%.4g", func(s *Side) any { return s.Candidate.DwellSeconds })
	of("steps", "%d", func(s *Side) any { return s.Steps })
	of("minutes", "%.1f", func(s *Side) any { return s.Minutes })
	of("read-noise gain", "%.2f", func(s *Side) any { return s.ReadNoiseGain })
	if c.A.Forecast != nil && c.B.Forecast != nil {
		of("brightest pixel, full", "%.2f", func(s *Side) any {
			return s.Forecast.Saturation.Electrons / s.Forecast.Saturation.Limit
		})
		for _, m := range c.A.Forecast.Wanted {
			for _, o := range c.B.Forecast.Wanted {
				if m.Name == o.Name {
					row("S/N of "+m.Name, fmt.Sprintf("%.2f", m.SNR), fmt.Sprintf("%.2f", o.SNR))
				}
			}
		}
	}
	fmt.Fprintf(&b, "\n%s\n", c.Verdict)
	return b.String()
}
