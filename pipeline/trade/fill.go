package trade

import (
	"context"
	"fmt"
	"math"

	"mirrorloom/pipeline/forecast"
)

// fill finds the dwell and the cycles with which a code fills the budget.
func (w *weighing) fill(ctx context.Context, c forecast.Candidate) (Row, error) {
	c.Cycles = max(w.Cycles, 1)
	c.DwellSeconds = shortestDwell
	shortest := w.Light.Time(c)
	if shortest.TotalSeconds > w.budget {
		row := Row{Candidate: c, TotalSeconds: shortest.TotalSeconds, CycleSeconds: shortest.CycleSeconds, Source: -1}
		row.breaks(BreachTime, fmt.Sprintf("the shortest night takes %s", seconds(shortest.TotalSeconds)),
			fmt.Sprintf("forecast.limits.total_s of %s, fewer calibration frames or wider elements", seconds(shortest.TotalSeconds)))
		return row, nil
	}
	if w.Cycles == 0 {
		limit := w.limit(c)
		if ok := w.forCycle(&c, limit); !ok {
			row := Row{Candidate: c, TotalSeconds: shortest.TotalSeconds, CycleSeconds: shortest.CycleSeconds, Source: -1, CycleLimit: limit}
			row.breaks(BreachCycle, fmt.Sprintf("a cycle takes %s or more of the %s that are allowed by %s", seconds(shortest.CycleSeconds), seconds(limit.Seconds), limit.cause()), limit.cure(shortest.CycleSeconds))
			return row, nil
		}
	}
	if w.DwellSeconds > 0 {
		return w.fixed(ctx, c)
	}
	c.DwellSeconds = w.dwell(c)
	row, err := w.try(ctx, c)
	if err != nil {
		return row, err
	}
	if row.Full > Fullest {
		if row, err = w.shorter(ctx, row); err != nil {
			return row, err
		}
	}
	w.bounds(&row)
	return row, nil
}

// bounds looks at the limits that a filled row may break.
func (w *weighing) bounds(row *Row) {
	if row.Breaks != "" {
		return
	}
	if steps := w.Light.Time(row.Candidate).Frames; steps > mostExposures {
		row.breaks(BreachSteps, fmt.Sprintf("it takes %d exposures where a sequence has at most %d", steps, mostExposures), "a smaller forecast.limits.total_s, or closed mirrors on the brightest star")
		return
	}
	w.judge(row)
}

// dwell is the one with which c's cycles fill the budget, in three digits; 0 where there is
// no time.
func (w *weighing) dwell(c forecast.Candidate) float64 {
	t := w.Light.Time(c)
	frames := float64(t.Steps + t.AllOff)
	overhead := t.ScienceSeconds/frames - c.DwellSeconds
	return floorDigits((w.budget-t.CalibrationSeconds)/frames - overhead)
}

// floorDigits rounds down to three digits.
func floorDigits(x float64) float64 {
	if !(x > 0) {
		return 0
	}
	unit := math.Pow(10, math.Floor(math.Log10(x))-2)
	// A hair is added so that a number of three digits stays itself.
	down := math.Floor(x/unit*(1+1e-12)) * unit
	if unit < 1 { // as text has it: 0.1 has no exact power
		inverse := math.Round(1 / unit)
		down = math.Floor(x*inverse*(1+1e-12)) / inverse
	}
	return down
}

// forCycle raises the cycles until one is short enough; false where none is.
func (w *weighing) forCycle(c *forecast.Candidate, most CycleLimit) bool {
	if most.Rule == RuleNone {
		return true
	}
	limit := most.Seconds
	if w.Light.Time(*c).CycleSeconds > limit { // at the shortest dwell
		return false
	}
	for {
		trial := *c
		if w.DwellSeconds > 0 {
			trial.DwellSeconds = w.DwellSeconds
			return w.Light.Time(trial).CycleSeconds <= limit
		}
		trial.DwellSeconds = w.dwell(trial)
		if trial.DwellSeconds < shortestDwell {
			return false
		}
		cycle := w.Light.Time(trial).CycleSeconds
		if cycle <= limit {
			return true
		}
		c.Cycles = max(c.Cycles+1, int(float64(c.Cycles)*cycle/limit))
	}
}

// fixed is a code whose dwell is given: in as many cycles as there is time for.
func (w *weighing) fixed(ctx context.Context, c forecast.Candidate) (Row, error) {
	c.DwellSeconds = w.DwellSeconds
	if w.Cycles == 0 {
		t := w.Light.Time(c)
		c.Cycles = max(1, int((w.budget-t.CalibrationSeconds)/t.CycleSeconds))
		for w.fits(c.Cycles+1, c) {
			c.Cycles++
		}
		for c.Cycles > 1 && !w.fits(c.Cycles, c) {
			c.Cycles--
		}
	}
	row, err := w.try(ctx, c)
	if err != nil {
		return row, err
	}
	switch {
	case row.TotalSeconds > w.budget*(1+1e-9):
		row.breaks(BreachTime, fmt.Sprintf("with dwell_s of %s it takes %s", seconds(c.DwellSeconds), seconds(row.TotalSeconds)),
			fmt.Sprintf("forecast.limits.total_s of %s, or a shorter dwell_s", seconds(row.TotalSeconds)))
	case row.Full >= 1:
		row.breaks(BreachSaturation, fmt.Sprintf("its brightest pixel saturates after %s", seconds(row.LongestDwellSeconds)),
			fmt.Sprintf("dwell_s of %s", seconds(floorDigits(Fullest*row.LongestDwellSeconds))))
	default:
		w.bounds(&row)
	}
	return row, nil
}

func (w *weighing) fits(cycles int, c forecast.Candidate) bool {
	c.Cycles = cycles
	return w.Light.Time(c).TotalSeconds <= w.budget*(1+1e-9)
}

// shorter makes a row whose brightest pixel is too full expose for less: in so many cycles
// that they fill the time, or in one cycle less, the time not filled; what gives more.
func (w *weighing) shorter(ctx context.Context, full Row) (Row, error) {
	c := full.Candidate
	longest := floorDigits(Fullest * full.LongestDwellSeconds)
	if longest < shortestDwell {
		full.breaks(BreachSaturation, fmt.Sprintf("its brightest pixel saturates after %s", seconds(full.LongestDwellSeconds)),
			"closed mirrors on the brightest source, or a sparser code")
		return full, nil
	}
	c.DwellSeconds = longest
	if w.Cycles > 0 {
		return w.try(ctx, c)
	}
	least := c.Cycles
	for w.fits(c.Cycles+1, c) {
		c.Cycles++
	}
	row, err := w.try(ctx, c)
	if err != nil || c.Cycles >= mostExposures/c.V {
		return row, err
	}
	c.Cycles = max(c.Cycles+1, least)
	if c.DwellSeconds = min(longest, w.dwell(c)); c.DwellSeconds < shortestDwell {
		return row, nil
	}
	more, err := w.try(ctx, c)
	if err != nil {
		return row, err
	}
	if more.Figure > row.Figure && more.Full <= Fullest {
		return more, nil
	}
	return row, nil
}
