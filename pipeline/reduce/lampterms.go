package reduce

import (
	"context"
	"errors"
	"math"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/parallel"
)

// lampTerms fits the neighbour term and the leak to lamp frames, row by row of the
// decoded lamp light. Each pass over the coded flat does so anew: neighbours lift the
// decoded light by d, which would else make d and the contrast too small by as much.
type lampTerms struct {
	columns, elements int
	// neighbour is all-on - all-even - all-odd + all-off, leak all-off: means over
	// their frames with variances; nil where a kind of frame is missing.
	neighbour, leak *calib.Exposure
	leakRows        []leakRow // by detector row
	beyond          *beyondField
	profile         *instrument.Profile
	leakFrame       calib.LeakFrame
	amplifier       [][]uint8 // by detector row, of each column

	neighbourFit *calib.ColourFit
	leakFit      *calib.LeakFit
}

func (r *reduction) newLampTerms(ctx context.Context, m *wholeMasters) (*lampTerms, error) {
	l := &r.roles.calibration.lamps
	t := &lampTerms{columns: r.camera.Columns, elements: r.seq.N()}
	var err error
	if len(l.off) > 0 {
		if t.leak, err = r.meanExposure(ctx, l.off, m); err != nil {
			return nil, err
		}
		t.leakRows = r.leakRows()
		t.beyond, t.profile = newBeyondField(r.seq), r.seq.Profile
		t.leakFrame = r.leakFrame(len(l.off))
		t.amplifier = r.camera.AmplifierOf()
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
	return t, nil
}

// leakFrame describes the mean of so many all-off frames of the lamp.
func (r *reduction) leakFrame(frames int) calib.LeakFrame {
	c := &r.roles.calibration
	f := calib.LeakFrame{Geometry: r.optics.geometry, Elements: r.seq.N(), Columns: r.camera.Columns, LevelRows: 1}
	p, columns := r.seq.Profile, r.seq.ElementColumns()
	middle := r.seq.Elements[columns[len(columns)/2]]
	for y := range r.camera.Rows {
		f.Coded = append(f.Coded, rowFlags(r.seq, p, mirrorRow(p, float64(y)), middle) == 0)
	}
	// A level is that of each frame and of each that was taken off.
	part := 1 / float64(frames)
	if n := len(c.bias); n > 0 {
		part += 1 / float64(n)
	}
	if n := len(c.dark); n > 0 {
		part += math.Pow(c.lamps.seconds/c.darkSeconds, 2) / float64(n)
	}
	for i := range r.camera.Amplifiers {
		variance, rows := r.camera.Amplifiers[i].LevelVariance()
		f.LevelRows = max(f.LevelRows, rows)
		f.LevelSigma = append(f.LevelSigma, math.Sqrt(part*variance))
	}
	return f
}

// begin empties the fits, which then take the light of a pass over the coded flat.
func (t *lampTerms) begin(o *optics) (err error) {
	if t.leak != nil {
		t.leakFrame.Geometry = o.geometry
		if t.leakFit, err = calib.NewLeakFit(calib.DefaultLeakRule(), t.leakFrame, o.leak); err != nil {
			return err
		}
	}
	if t.neighbour != nil {
		t.neighbourFit, err = calib.NewColourFit(calib.NeighbourRule(t.elements), o.geometry, t.elements, t.columns)
	}
	return err
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

// lampRow is what a row of decoded lamp light adds to the fits; nil for nothing.
type lampRow struct {
	neighbour *calib.ColourFit
	leak      *calib.LeakSums
}

// addRows adds rows of decoded lamp light, in their order; so many workers gather them.
func (t *lampTerms) addRows(ctx context.Context, rows []*decodedRow, workers int) error {
	gathered := make([]lampRow, len(rows))
	err := parallel.Do(ctx, workers, len(rows), func(_, i int) error {
		gathered[i] = t.gather(rows[i])
		return nil
	})
	if err != nil {
		return err
	}
	for _, row := range gathered {
		if row.neighbour != nil {
			t.neighbourFit.Merge(row.neighbour)
		}
		if row.leak != nil {
			t.leakFit.Add(row.leak)
		}
	}
	return nil
}

func (t *lampTerms) gather(row *decodedRow) (sums lampRow) {
	a, b := row.y*t.columns, (row.y+1)*t.columns
	if e := t.neighbour; t.neighbourFit != nil {
		sums.neighbour = t.neighbourFit.Fork()
		sums.neighbour.AddRow(row.y, e.Signal[a:b], e.Variance[a:b], e.Flags[a:b], row.signal)
	}
	if e, at := t.leak, t.leakRows; t.leakFit != nil && at[row.y].use {
		own := calib.LeakRow{
			Y: row.y, Term: e.Signal[a:b], Variance: e.Variance[a:b], Flags: e.Flags[a:b],
			Amplifier: t.amplifier[row.y],
		}
		if at[row.y].lit {
			own.Light = row.signal
			own.Before, own.After = make([]float64, t.columns), make([]float64, t.columns)
			t.beyond.row(own.Before, own.After, t.profile, &t.leakFrame.Geometry, row.y)
		}
		sums.leak = t.leakFit.Row(own)
	}
	return sums
}

// solve puts the terms into o; a term that the lamp does not fix stays nil.
func (t *lampTerms) solve(o *optics) (err error) {
	o.neighbour, o.leak = nil, nil
	if t.neighbourFit != nil {
		if o.neighbour, err = t.neighbourFit.Solve(); err != nil && !errors.Is(err, calib.ErrNoLight) {
			return err
		}
	}
	if t.leakFit != nil {
		if o.leak, err = t.leakFit.Solve(); err != nil && !errors.Is(err, calib.ErrNoLight) {
			return err
		}
	}
	return nil
}
