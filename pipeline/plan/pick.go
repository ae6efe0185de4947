package plan

import (
	"context"
	"fmt"
	"slices"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

// PickedRows are rows that plan chose by a source of the forecast.
type PickedRows struct {
	// Use is sequence.UseSentinel or sequence.UseClosed.
	Use    string `json:"use"`
	Source int    `json:"source"`
	// First and Last are the outermost mirror rows, w; Elements the first and the last element.
	First    int    `json:"first"`
	Last     int    `json:"last"`
	Elements [2]int `json:"elements"`
	// Why is one clause.
	Why string `json:"why"`
}

// String is one line.
func (p PickedRows) String() string {
	elements := fmt.Sprintf("element %d", p.Elements[0])
	if p.Elements[1] > p.Elements[0] {
		elements = fmt.Sprintf("elements %d to %d", p.Elements[0], p.Elements[1])
	}
	return fmt.Sprintf("%d to %d %s, %s, on source %d: %s", p.First, p.Last, p.Use, elements, p.Source, p.Why)
}

// picking chooses rows by the sources of a target's forecast.
type picking struct {
	target    *sequence.Target // a copy, with what was chosen so far
	profile   *instrument.Profile
	code      *hadamard.Code
	dark      []int
	candidate forecast.Candidate
	light     *forecast.Light
	picked    []PickedRows
	warnings  []string
}

// pick gives the target the rows that its from_sources asks for; without the key it is left
// as it is.
func pick(ctx context.Context, target *sequence.Target, profile *instrument.Profile, code *hadamard.Code, dark []int) (*picking, error) {
	p := &picking{target: target, profile: profile, code: code, dark: dark}
	asked := target.FromSources
	if asked == nil {
		return p, nil
	}
	t := *target
	t.FromSources = nil
	p.target = &t
	p.candidate = forecast.Candidate{
		Family: string(code.Family()), V: code.V(), K: code.K(), L: code.L(), N: code.V() - len(dark), ElementMirrors: t.Code.ElementMirrors,
		Dark: len(dark), DwellSeconds: t.DwellSeconds, Cycles: t.Code.Cycles,
	}
	if err := p.look(); err != nil {
		return nil, err
	}
	if asked.Sentinels > 0 {
		if err := p.sentinels(ctx, asked.Sentinels); err != nil {
			return nil, err
		}
	}
	if asked.Patches > 0 {
		if err := p.patches(ctx, asked.Patches); err != nil {
			return nil, err
		}
	}
	return p, nil
}

// look works out the light with the rows as they are now.
func (p *picking) look() (err error) {
	now := *p.target
	p.light, err = forecast.New(&now, p.profile)
	return err
}

func (p *picking) warn(format string, args ...any) {
	p.warnings = append(p.warnings, fmt.Sprintf(format, args...))
}

// stars are the sources that may be shut or watched: stars that no measurement is about.
func (p *picking) stars() []int {
	var list []int
	for i := range p.target.Forecast.Sources {
		if trade.Unwanted(p.target.Forecast, i) {
			list = append(list, i)
		}
	}
	return list
}

// What may be left of a star, in parts of the other variance of its rows: a patch is laid
// where the star doubles the noise's variance, and is large enough when a quarter is left, an
// eighth more noise.
const (
	ruledFrom = 1.0
	ruledLeft = 0.25
)

// Radii of a patch, in FWHM of the seeing: from where half of a star's light is covered, 1/2,
// to where 1e-15 of a Gaussian is left, in steps of less than a mirror in most instruments.
const (
	leastPatch = 0.5
	mostPatch  = 3.5
	patchStep  = 0.25
)

// patches closes mirrors on stars that would saturate or rule their rows, the worst first.
func (p *picking) patches(ctx context.Context, most int) error {
	if err := p.look(); err != nil { // sentinel rows show their stars no more
		return err
	}
	var done []int
	for len(done) < most {
		source, why, err := p.worst(done)
		if err != nil || source < 0 {
			return err
		}
		done = append(done, source)
		if err := p.patch(ctx, source, why); err != nil {
			return err
		}
	}
	if source, why, err := p.worst(done); err != nil {
		return err
	} else if source >= 0 {
		p.warn("source %d %s, and from_sources.patches allows for no more than %d; give a larger number", source, why, most)
	}
	return nil
}

// worst is the star, not among those done, that is to be shut next, and why; -1 for none.
func (p *picking) worst(done []int) (source int, why string, err error) {
	stars := slices.DeleteFunc(p.stars(), func(i int) bool { return slices.Contains(done, i) })
	s, err := p.light.Brightest(p.candidate)
	if err != nil {
		return -1, "", err
	}
	if full := s.Electrons / s.Limit; full > trade.Fullest && slices.Contains(stars, s.Source) {
		return s.Source, fmt.Sprintf("fills its brightest pixel to %.3g times the limit", full), nil
	}
	source, most := -1, ruledFrom
	for _, i := range stars {
		ruled, err := p.light.Ruled(p.candidate, i)
		if err != nil {
			return -1, "", err
		}
		if ruled > most {
			source, most = i, ruled
			why = fmt.Sprintf("gives the other elements of its rows %.3g times the variance that they have without it", ruled)
		}
	}
	return source, why, nil
}

// patch closes the smallest circle on a star that leaves neither.
func (p *picking) patch(ctx context.Context, source int, why string) error {
	seeing := p.target.Forecast.SeeingFWHMArcsec
	for size := leastPatch; size <= mostPatch; size += patchStep {
		if err := ctx.Err(); err != nil {
			return err
		}
		c := trade.Covered(p.light, p.candidate, source, size*seeing)
		enough, err := p.leaves(c, source)
		if err != nil {
			return err
		}
		if !enough {
			continue
		}
		p.target.Closed = append(slices.Clone(p.target.Closed), c.Closed...)
		p.picked = append(p.picked, patchOf(c.Closed, source, fmt.Sprintf("it %s; mirrors within %.3g FWHM of the seeing leave less", why, size)))
		return p.look()
	}
	p.warn("source %d %s, and no patch of up to %.2g FWHM of the seeing cures it; give a shorter dwell_s, or close its rows (closed)", source, why, mostPatch)
	return nil
}

// leaves tells whether a candidate's closed mirrors leave of a star neither a full pixel nor
// noise that rules its rows.
func (p *picking) leaves(c forecast.Candidate, source int) (bool, error) {
	s, err := p.light.Brightest(c)
	if err != nil {
		return false, err
	}
	if s.Source == source && s.Electrons > trade.Fullest*s.Limit {
		return false, nil
	}
	ruled, err := p.light.Ruled(c, source)
	return ruled <= ruledLeft, err
}

func patchOf(closed []sequence.ClosedRow, source int, why string) PickedRows {
	r := PickedRows{Use: sequence.UseClosed, Source: source, Why: why}
	for i, c := range closed {
		if i == 0 {
			r.First, r.Last, r.Elements = c.First, c.Last, [2]int{*c.Element, *c.Element}
		}
		r.First, r.Last = min(r.First, c.First), max(r.Last, c.Last)
		r.Elements = [2]int{min(r.Elements[0], *c.Element), max(r.Elements[1], *c.Element)}
	}
	return r
}
