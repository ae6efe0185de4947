package trade

import (
	"context"
	"fmt"
	"math"
	"slices"

	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

const (
	// Fullest is how full the brightest pixel is to be at most: the forecast is an expected
	// value, and seeing may be better than it says (common practice, no source).
	Fullest = 0.9
	// shortestDwell, s: below it a mask is not shown for a well-known time (common practice,
	// no source).
	shortestDwell = 0.1
	// mostExposures is what plan allows a sequence.
	mostExposures = 20000
	// coverSeeings is the radius of closed mirrors about a star, in FWHM of the seeing: 1.5
	// in 1e5 of a Gaussian lies beyond.
	coverSeeings = 2
	// covered is how many stars may be closed, and coverRows how many rows of a field, the
	// best ones, are tried again with them closed.
	covered, coverRows = 3, 3
)

// weighing is a comparison at work.
type weighing struct {
	Request
	limits sequence.Limits
	budget float64
}

// field is the rows of a field.
func (w *weighing) field(ctx context.Context, f Field) ([]Row, error) {
	v := 0
	if w.V != nil {
		v = *w.V
	}
	var rows []Row
	for _, c := range codes(f, v, w.Dark, w.limits) {
		row, err := w.weigh(ctx, c, nil)
		if err != nil {
			return nil, err
		}
		rows = append(rows, row)
	}
	return w.withCovers(ctx, rows)
}

// withCovers adds rows with mirrors closed on stars that nobody wants.
func (w *weighing) withCovers(ctx context.Context, rows []Row) ([]Row, error) {
	t := &Trade{Rows: slices.Clone(rows)}
	t.sort()
	tried, last := 0, len(t.Rows)
	for i := range last {
		r := t.Rows[i]
		if tried == coverRows || r.Breaks != "" && r.Breaks != BreachSaturation {
			continue
		}
		tried++
		for range covered {
			if !Unwanted(w.Target.Forecast, r.Source) || slices.Contains(r.Covered, r.Source) {
				break
			}
			next, err := w.weigh(ctx, bare(r.Candidate), append(slices.Clone(r.Covered), r.Source))
			if err != nil {
				return nil, err
			}
			if len(next.Candidate.Closed) > 0 {
				rows = append(rows, next)
			}
			r = next
		}
	}
	return rows, nil
}

// bare is a candidate's code alone.
func bare(c forecast.Candidate) forecast.Candidate {
	c.DwellSeconds, c.Cycles, c.Closed = 0, 0, nil
	return c
}

// Unwanted tells whether a source is a star that no measurement is about.
func Unwanted(f *sequence.Forecast, source int) bool {
	if source < 0 || source >= len(f.Sources) || f.Sources[source].Kind != scene.KindStar {
		return false
	}
	return !slices.ContainsFunc(f.Wanted, func(m sequence.Wanted) bool { return m.Source != nil && *m.Source == source })
}

// given judges the target's own candidate as it is.
func (w *weighing) given(ctx context.Context, c forecast.Candidate) (Row, error) {
	row, err := w.try(ctx, c)
	if err != nil {
		return row, err
	}
	row.Given = true
	row.CycleLimit = w.limitIn(row.Candidate, w.Light.Time(row.Candidate).ScienceSeconds)
	switch {
	case row.Full >= 1:
		row.breaks(BreachSaturation, fmt.Sprintf("its brightest pixel saturates after %s", seconds(row.LongestDwellSeconds)), "a shorter dwell_s")
	case row.TotalSeconds > w.budget*(1+1e-9):
		row.breaks(BreachTime, fmt.Sprintf("it takes %s of the %s allowed", seconds(row.TotalSeconds), seconds(w.budget)), "a shorter dwell_s or fewer cycles")
	default:
		w.judge(&row)
	}
	return row, nil
}

// judge looks at the limits that need no other dwell.
func (w *weighing) judge(row *Row) {
	c := row.Candidate
	least := max(lostPerDark*w.limits.LostFrames, 0)
	if w.limits.LostFrames > 0 || w.limits.CosmicPer1000 > 0 {
		least = LeastDark(c.V, w.limits)
	}
	switch {
	case row.CycleLimit.broken(row.CycleSeconds):
		row.breaks(BreachCycle, fmt.Sprintf("a cycle takes %s of the %s that are allowed by %s", seconds(row.CycleSeconds), seconds(row.CycleLimit.Seconds), row.CycleLimit.cause()), row.CycleLimit.cure(row.CycleSeconds))
	case !row.IsSlit() && c.Dark < least:
		row.breaks(BreachDark, fmt.Sprintf("its %d dark columns are fewer than the %d that the limits ask for", c.Dark, least), "a larger code or fewer elements")
	}
}

func (r *Row) breaks(b Breach, why, cure string) { r.Breaks, r.Why, r.Cure = b, why, cure }

// try works out a candidate whose dwell and cycles are settled.
func (w *weighing) try(ctx context.Context, c forecast.Candidate) (Row, error) {
	got, err := w.Light.Of(ctx, c)
	if err != nil {
		return Row{}, err
	}
	row := Row{
		Candidate: got.Candidate, Figure: forecast.Figure(w.Target.Forecast.Aim, got.Wanted),
		TotalSeconds: got.Time.TotalSeconds, CycleSeconds: got.Time.CycleSeconds,
		Full: got.Saturation.Electrons / got.Saturation.Limit, Source: got.Saturation.Source,
		LongestDwellSeconds: got.Saturation.LongestDwellSeconds,
		CycleLimit:          w.limit(got.Candidate),
	}
	if math.IsNaN(row.Figure) {
		row.Figure = 0
	}
	for _, m := range got.Wanted {
		row.PhotonPart += m.Variance.Photons / float64(len(got.Wanted))
	}
	return row, nil
}

// limit is that of a candidate's cycles, whose science frames fill the budget.
func (w *weighing) limit(c forecast.Candidate) CycleLimit {
	return w.limitIn(c, max(0, w.budget-w.Light.Time(c).CalibrationSeconds))
}

func (w *weighing) limitIn(c forecast.Candidate, scienceSeconds float64) CycleLimit {
	return LimitOf(w.Target, w.Profile, w.Light, c, scienceSeconds)
}

// weigh finds dwell and cycles for a code, with mirrors closed on sources.
func (w *weighing) weigh(ctx context.Context, c forecast.Candidate, cover []int) (Row, error) {
	radius := coverSeeings * w.Target.Forecast.SeeingFWHMArcsec
	for _, source := range cover {
		c = Covered(w.Light, c, source, radius)
	}
	row, err := w.fill(ctx, c)
	row.Covered = cover
	return row, err
}

// Covered is a candidate with mirrors closed besides within radius arc seconds of a source.
func Covered(light *forecast.Light, c forecast.Candidate, source int, radius float64) forecast.Candidate {
	c.Closed = disjoint(append(slices.Clone(c.Closed), light.Cover(c, source, radius)...))
	return c
}

// disjoint drops rows that others hold already, so that each has one use: covers of stars
// near each other overlap.
func disjoint(closed []sequence.ClosedRow) []sequence.ClosedRow {
	var list []sequence.ClosedRow
	for _, r := range closed {
		for at := 0; at < len(list); at++ {
			o := list[at]
			if *o.Element == *r.Element && r.First <= o.Last && o.First <= r.Last {
				r.First, r.Last = min(r.First, o.First), max(r.Last, o.Last)
				list = slices.Delete(list, at, at+1)
				at = -1
			}
		}
		list = append(list, r)
	}
	return list
}
