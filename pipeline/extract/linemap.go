package extract

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"sync"
	"sync/atomic"

	"mirrorloom/pipeline/instrument"
)

// LineMap holds the lines of every element and row.
type LineMap struct {
	Elements, Rows int
	Options        LineOptions
	// Lines is [row*Elements+element][line].
	Lines  [][]Line
	Status []Status
	// Chi2 is that of the fit per degree of freedom, of independent channels.
	Chi2 []float32
	Unit string
}

// check fills in defaults and refuses lines that the cube does not hold. It returns
// the range of channels that is fitted.
func (o *LineOptions) check(g instrument.Grid) (from, to int, err error) {
	if len(o.RestNM) == 0 {
		return 0, 0, fmt.Errorf("no lines given; list their vacuum wavelengths in nm")
	}
	step := math.Abs(g.StepNM)
	if o.WindowNM == 0 {
		o.WindowNM = DefaultWindowVoxels * step
	}
	if o.RangeKmS == 0 {
		o.RangeKmS = DefaultRangeKmS
	}
	if !(o.WindowNM >= 4*step) || !(o.RangeKmS > 0 && o.RangeKmS < 1e5) || !(math.Abs(o.VelocityKmS) < 1e5) {
		return 0, 0, fmt.Errorf("a window of %g nm around velocities of %g +- %g km/s cannot be fitted; give 4 voxels or more (%.3g nm) and velocities below 100000 km/s", o.WindowNM, o.VelocityKmS, o.RangeKmS, 4*step)
	}
	low, high := math.Inf(1), math.Inf(-1)
	for i, rest := range o.RestNM {
		if !(rest > 0) {
			return 0, 0, fmt.Errorf("a line at %g nm is none", rest)
		}
		for _, other := range o.RestNM[:i] {
			if math.Abs(other-rest) < step/4 {
				return 0, 0, fmt.Errorf("the lines at %g and %g nm are less than a quarter of a voxel apart; give one of them", other, rest)
			}
		}
		nm := rest * (1 + o.VelocityKmS/lightKmS)
		low, high = min(low, nm), max(high, nm)
	}
	a, b := g.Index(low-o.WindowNM), g.Index(high+o.WindowNM)
	from, to = int(math.Round(min(a, b))), int(math.Round(max(a, b)))+1
	if first, last := g.Index(low), g.Index(high); min(first, last) < 0 || max(first, last) > float64(g.Count-1) {
		return 0, 0, fmt.Errorf("lines at %g to %g nm (observed) are not within the cube's %g to %g nm in vacuum", low, high, g.WavelengthNM(0), g.LastNM())
	}
	return max(from, 0), min(to, g.Count), nil
}

func (o *LineOptions) model(g instrument.Grid, from, to int, unit string) *lineModel {
	m := &lineModel{o: o, sigma0: startSigma * math.Abs(g.WidthNM((from+to)/2))}
	for l := from; l <= to; l++ {
		m.edges = append(m.edges, g.WavelengthNM(float64(l)-0.5))
	}
	first, last := m.edges[0], m.edges[len(m.edges)-1]
	m.middle, m.half = (first+last)/2, math.Abs(last-first)/2
	for l := range to - from {
		m.widths = append(m.widths, 1)
		if perNM(unit) {
			m.widths[l] = math.Abs(m.edges[l+1] - m.edges[l])
		}
	}
	return m
}

// Lines fits lines in the spectrum of every element and row.
func (c *Cube) Lines(ctx context.Context, o LineOptions, progress func(done int)) (*LineMap, error) {
	from, to, err := o.check(c.Grid)
	if err != nil {
		return nil, err
	}
	n := c.Elements * c.Rows
	m := &LineMap{Elements: c.Elements, Rows: c.Rows, Options: o, Unit: bandUnit(c.Unit),
		Lines: make([][]Line, n), Status: make([]Status, n), Chi2: make([]float32, n)}
	for y0 := 0; y0 < c.Rows; y0 += pieceRows {
		y1 := min(y0+pieceRows, c.Rows)
		v, err := c.readVoxels(ctx, from, to, y0, y1)
		if err != nil {
			return nil, err
		}
		runs, err := c.readRuns(ctx, v, from, to, y0, y1)
		if err != nil {
			return nil, err
		}
		if err := c.fitRows(ctx, m, v, runs, y0, y1, from, to); err != nil {
			return nil, err
		}
		progress(y1)
	}
	return m, nil
}

// fitRows fits rows y0..y1-1, several at a time.
func (c *Cube) fitRows(ctx context.Context, m *LineMap, v *voxelBlock, runs []runVoxels, y0, y1, from, to int) error {
	var next atomic.Int64
	var workers sync.WaitGroup
	failed := make([]error, y1-y0)
	for range min(runtime.GOMAXPROCS(0), y1-y0) {
		workers.Go(func() {
			noise, model := c.newFieldNoise(from, to), m.Options.model(c.Grid, from, to, c.Unit)
			for i := int(next.Add(1)) - 1; i < y1-y0; i = int(next.Add(1)) - 1 {
				failed[i] = c.fitRow(ctx, m, model, noise, v, runs, y0, i)
			}
		})
	}
	workers.Wait()
	for _, err := range failed {
		if err != nil {
			return err
		}
	}
	return nil
}

func (c *Cube) fitRow(ctx context.Context, m *LineMap, model *lineModel, noise *fieldNoise, v *voxelBlock, runs []runVoxels, y0, i int) error {
	y, channels := y0+i, noise.to-noise.from
	if err := ctx.Err(); err != nil {
		return err
	}
	if err := noise.setRow(y); err != nil {
		return err
	}
	covariance := table[float64](channels, Lags+1)
	values, variance := make([]float64, channels), make([]float64, channels)
	for j := range c.Elements {
		s, at := v.spectrum(i*c.Elements+j), y*c.Elements+j
		for l := range values {
			values[l], variance[l] = 0, 0
			if s.good(l) {
				values[l], variance[l] = float64(s.signal[l]), float64(s.variance[l])
			}
		}
		noise.setElement(j, s, runs)
		noise.covariance(covariance, variance)
		f := model.fit(values, variance, covariance)
		m.Lines[at] = model.lines(&f, noise.shared(variance))
		m.Status[at], m.Chi2[at] = f.status, float32(f.chi2)
		if f.covariance == nil {
			m.Chi2[at] = float32(math.NaN())
		}
	}
	return nil
}

// fitSpectrum fits lines in the spectrum of an aperture.
func (c *Cube) fitSpectrum(s *Spectrum, o LineOptions) ([]Line, Status, error) {
	from, to, err := o.check(c.Grid)
	if err != nil {
		return nil, 0, err
	}
	values, variance := make([]float64, to-from), make([]float64, to-from)
	for l := range values {
		if v, e := s.Signal[from+l], s.Error[from+l]; !math.IsNaN(v) && e > 0 {
			values[l], variance[l] = v, e*e
		}
	}
	m := o.model(c.Grid, from, to, c.Unit)
	f := m.fit(values, variance, s.Covariance[from:to])
	lines := m.lines(&f, 0) // the covariance of the channels holds the responses'
	return lines, f.status, nil
}
