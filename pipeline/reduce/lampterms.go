package reduce

import (
	"context"
	"errors"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
)

// lampTerms fits the neighbour term and the leak to lamp frames, row by row of the
// decoded lamp light.
type lampTerms struct {
	columns int
	// neighbour is all-on - all-even - all-odd + all-off, leak all-off: means over
	// their frames with variances; nil where a kind of frame is missing.
	neighbour, leak       *calib.Exposure
	neighbourFit, leakFit *calib.ColourFit
	beyond                []leakRow // by detector row
}

func (r *reduction) newLampTerms(ctx context.Context, m *wholeMasters) (*lampTerms, error) {
	l := &r.roles.calibration.lamps
	t := &lampTerms{columns: r.camera.Columns}
	g, n := r.optics.geometry, r.seq.N()
	var err error
	if len(l.off) > 0 {
		if t.leak, err = r.meanExposure(ctx, l.off, m); err != nil {
			return nil, err
		}
		t.beyond = r.leakRows()
		if t.leakFit, err = calib.NewColourFit(calib.LeakRule(0, 0), g, n, t.columns); err != nil {
			return nil, err
		}
	}
	if len(l.on) == 0 || len(l.even) == 0 || len(l.odd) == 0 || len(l.off) == 0 {
		return t, nil
	}
	on, err := r.meanExposure(ctx, l.on, m)
	if err != nil {
		return nil, err
	}
	for _, part := range [][]*exposure.Frame{l.even, l.odd} {
		e, err := r.meanExposure(ctx, part, m)
		if err != nil {
			return nil, err
		}
		combine(on, e, -1)
	}
	combine(on, t.leak, 1)
	t.neighbour = on
	t.neighbourFit, err = calib.NewColourFit(calib.NeighbourRule(n), g, n, t.columns)
	return t, err
}

// meanExposure is the mean of frames, less bias and dark current.
func (r *reduction) meanExposure(ctx context.Context, frames []*exposure.Frame, m *wholeMasters) (*calib.Exposure, error) {
	e, err := r.sumExposures(ctx, frames, m, false)
	if err != nil {
		return nil, err
	}
	n := float32(len(frames))
	for i := range e.Signal {
		e.Signal[i] /= n
		e.Variance[i] /= n * n
	}
	return e, nil
}

// combine adds sign times e to sum.
func combine(sum, e *calib.Exposure, sign float32) {
	for i, v := range e.Signal {
		sum.Signal[i] += sign * v
		sum.Variance[i] += e.Variance[i]
		sum.Flags[i] |= e.Flags[i]
	}
}

// addRow adds a row of decoded lamp light.
func (t *lampTerms) addRow(row *decodedRow) {
	a, b := row.y*t.columns, (row.y+1)*t.columns
	if e := t.neighbour; t.neighbourFit != nil {
		t.neighbourFit.AddRow(row.y, e.Signal[a:b], e.Variance[a:b], e.Flags[a:b], row.signal)
	}
	if e := t.leak; t.leakFit != nil && t.beyond[row.y].use {
		own := t.leakFit.ForkBeyond(t.beyond[row.y].before, t.beyond[row.y].after)
		own.AddRow(row.y, e.Signal[a:b], e.Variance[a:b], e.Flags[a:b], row.signal)
		t.leakFit.Merge(own)
	}
}

// solve puts the terms into o; a term that the lamp does not fix stays nil.
func (t *lampTerms) solve(o *optics) error {
	for _, f := range []struct {
		fit *calib.ColourFit
		to  **calib.ColourTerm
	}{{t.neighbourFit, &o.neighbour}, {t.leakFit, &o.leak}} {
		if f.fit == nil {
			continue
		}
		term, err := f.fit.Solve()
		if errors.Is(err, calib.ErrNoLight) {
			continue
		}
		if err != nil {
			return err
		}
		*f.to = term
	}
	return nil
}
