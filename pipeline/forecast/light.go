package forecast

import (
	"context"
	"fmt"
	"math"
	"sync"
	"time"

	"mirrorloom/calib"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// Light is the light of a target in an instrument. Of asks it about candidates; what they
// share is worked out once. Safe for concurrent use.
type Light struct {
	target  *sequence.Target
	profile *instrument.Profile
	scene   *scene.Scene
	start   time.Time
	camera  *camera
	rows    *calib.RowShift
	columns *calib.Resampler
	traces  []traced // by column
	// edgesNM are the edges of the grid's voxels, vacuum nm.
	edgesNM    []float64
	wanted     []wanted
	frameBytes float64

	mu      sync.Mutex
	devices map[deviceKey]*deviceLight
	fields  map[fieldKey]*fieldLight
}

// New prepares the forecast of a target that has the key forecast. Target and profile are
// not to be changed afterwards. Errors about the target are *config.Error with key path.
func New(target *sequence.Target, profile *instrument.Profile) (*Light, error) {
	return NewOn(target, profile, profile.Grid.EdgesNM())
}

// NewOn is New for voxels with other edges than the profile's grid has: ascending vacuum
// wavelengths at the telescope, nm, one more than voxels.
func NewOn(target *sequence.Target, profile *instrument.Profile, edgesNM []float64) (*Light, error) {
	if target.Forecast == nil {
		return nil, &config.Error{Path: "forecast", What: "the target says nothing of what to expect; add the key"}
	}
	if err := profile.Validate(); err != nil {
		return nil, fmt.Errorf("profile: %w", err)
	}
	if err := target.Check(); err != nil {
		return nil, err
	}
	l := &Light{target: target, profile: profile, scene: target.Scene(), edgesNM: edgesNM, devices: map[deviceKey]*deviceLight{}, fields: map[fieldKey]*fieldLight{}}
	var err error
	if l.start, err = target.Start(); err != nil {
		return nil, err
	}
	if err := l.scene.Usable(); err != nil {
		return nil, fmt.Errorf("forecast: %w", err)
	}
	if l.camera, err = newCamera(profile); err != nil {
		return nil, err
	}
	d := profile.Detector
	if l.columns, err = calib.NewResampler(0, d.Columns-1); err != nil {
		return nil, err
	}
	geometry := l.geometry(Candidate{N: 1, ElementMirrors: 1})
	shift := make([]float64, d.Columns)
	for x := range shift {
		shift[x] = geometry.TraceShift(float64(x))
		l.traces = append(l.traces, newTraced(shift[x]))
	}
	if l.rows, err = calib.NewRowShift(shift, d.Rows); err != nil {
		return nil, err
	}
	const block = 2880 // of a FITS file
	l.frameBytes = block * (1 + math.Ceil(float64(d.RawColumns())*float64(d.RawRows())*2/block))
	for i := range target.Forecast.Wanted {
		w, err := l.newWanted(i)
		if err != nil {
			return nil, err
		}
		l.wanted = append(l.wanted, w)
	}
	return l, nil
}

// geometry is where light of a candidate's elements lands, nominally.
func (l *Light) geometry(c Candidate) calib.Geometry {
	s := l.profile.Spectrograph
	return calib.Geometry{
		X_c: s.XCenterPx, Y_c: s.YCenterPx, X_e: l.profile.ElementStepPx(c.ElementMirrors), J_c: float64(c.N-1)/2 - float64(l.target.OffsetU())/float64(c.ElementMirrors),
		L_c: s.CenterNM, D: s.DispersionPxPerNM, SlitTilt: s.SlitTilt, Smile: s.SmilePerPx,
		TraceTilt: s.TraceTilt, TraceCurve: s.TraceCurvePerPx,
	}
}

// Of is the forecast of a candidate, with the slit scan that takes as long. Errors say what
// makes it no candidate, and are those of ctx.
func (l *Light) Of(ctx context.Context, c Candidate) (*Result, error) {
	c, err := l.resolved(c)
	if err != nil {
		return nil, err
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	t := l.Time(c)
	at := l.sightOf(t)
	field := l.field(c, at)
	r := &Result{Candidate: c, Time: t, Airmass: at.airmass}
	r.ThroughputRMS = l.throughputLeft(field, c)
	if r.Wanted, err = l.measures(ctx, field, c, taken{float64(c.Cycles), r.ThroughputRMS}); err != nil {
		return nil, err
	}
	r.Saturation = l.saturation(field, c)
	if c.K == 1 {
		return r, nil
	}
	r.Slit, err = l.slit(ctx, field, c.SlitScan(), t.ScienceSeconds)
	return r, err
}

// slit is the slit scan of a candidate's elements in so much science time: in one cycle, or
// in as many as keep the brightest pixel below saturation. Nil where there is no time.
func (l *Light) slit(ctx context.Context, field *fieldLight, c Candidate, seconds float64) (*Slit, error) {
	c.Cycles = 1
	if c.DwellSeconds = l.slitDwell(c.N, 1, seconds); c.DwellSeconds <= 0 {
		return nil, nil
	}
	s := &Slit{Candidate: c, Saturation: l.saturation(field, c)}
	for s.Saturation.Saturated() {
		c.Cycles = max(c.Cycles+1, int(math.Ceil(float64(c.Cycles)*c.DwellSeconds/s.Saturation.LongestDwellSeconds)))
		if c.DwellSeconds = l.slitDwell(c.N, c.Cycles, seconds); c.DwellSeconds <= 0 {
			break // no dwell is short enough: one cycle, saturated
		}
		s.Candidate, s.Saturation = c, l.saturation(field, c)
	}
	var err error
	s.Wanted, err = l.measures(ctx, field, s.Candidate, taken{float64(s.Candidate.Cycles), l.target.Forecast.ThroughputRMS})
	return s, err
}

// taken is what frames have in common with a candidate's and what not: cycles, the number of
// frames of each step, and throughput, the scatter of the transmission that is left.
type taken struct{ cycles, throughput float64 }

// Planned is what Of says of what is wanted, and no more.
func (l *Light) Planned(ctx context.Context, c Candidate) ([]Measure, error) {
	c, err := l.resolved(c)
	if err != nil {
		return nil, err
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	field := l.field(c, l.sightOf(l.Time(c)))
	return l.measures(ctx, field, c, taken{float64(c.Cycles), l.throughputLeft(field, c)})
}

// Taken is what is wanted of frames that were taken of a candidate, with the voxels of each
// measurement: cycles of each step, in the harmonic mean, with a relative error throughput of
// each frame's transmission, nil for what is expected of it.
func (l *Light) Taken(ctx context.Context, c Candidate, cycles float64, throughput *float64) ([]Measure, [][]Voxel, error) {
	c, err := l.resolved(c)
	if err != nil {
		return nil, nil, err
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	field := l.field(c, l.sightOf(l.Time(c)))
	of := taken{cycles: cycles}
	if throughput != nil {
		of.throughput = *throughput
	} else {
		of.throughput = l.throughputLeft(field, c)
	}
	if !(of.cycles > 0) || !(of.throughput >= 0) {
		return nil, nil, fmt.Errorf("%v cycles with an error of the transmission of %v are no frames; give positive numbers", of.cycles, of.throughput)
	}
	list, voxels := make([]Measure, len(l.wanted)), make([][]Voxel, len(l.wanted))
	for i := range l.wanted {
		if err := ctx.Err(); err != nil {
			return nil, nil, err
		}
		list[i] = l.measure(field, c, of, i, func(v Voxel) { voxels[i] = append(voxels[i], v) })
	}
	return list, voxels, nil
}

// measures are those of all that is wanted.
func (l *Light) measures(ctx context.Context, field *fieldLight, c Candidate, of taken) ([]Measure, error) {
	list := make([]Measure, len(l.wanted))
	for i := range l.wanted {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		list[i] = l.measure(field, c, of, i, nil)
	}
	return list, nil
}

// Voxel is the forecast of one voxel of a measurement, in the cube's units.
type Voxel struct {
	// Element, Row and Channel are its place in the cube, from 0.
	Element, Row, Channel int
	// Weight is the part of it that is added up.
	Weight float64
	// Wanted is the light wanted, Light all of it, Sky that of the sky; Sigma the standard
	// deviation. Electrons in one science exposure.
	Wanted, Light, Sky, Sigma float64
}

// Voxels are the voxels that a candidate's measurement adds up, by element, row and channel.
func (l *Light) Voxels(c Candidate, wanted int) ([]Voxel, error) {
	c, err := l.resolved(c)
	if err != nil {
		return nil, err
	}
	if wanted < 0 || wanted >= len(l.wanted) {
		return nil, fmt.Errorf("there is no measurement %d; the forecast wants %d", wanted, len(l.wanted))
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	field := l.field(c, l.sightOf(l.Time(c)))
	var list []Voxel
	l.measure(field, c, taken{float64(c.Cycles), l.throughputLeft(field, c)}, wanted, func(v Voxel) { list = append(list, v) })
	return list, nil
}

// Row is what the pixels of a detector row hold in the mean over a cycle's coded frames,
// electrons by column, dark current and leak included.
func (l *Light) Row(c Candidate, y int) ([]float64, error) {
	c, err := l.resolved(c)
	if err != nil {
		return nil, err
	}
	if y < 0 || y >= l.camera.rows {
		return nil, fmt.Errorf("there is no row %d among the detector's %d", y, l.camera.rows)
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	n := newNoiseModel(l, l.field(c, l.sightOf(l.Time(c))), c, taken{cycles: float64(c.Cycles)})
	light := n.field.pixelRow(y)
	open, row := float64(c.K)/float64(c.V), make([]float64, l.camera.columns)
	for x := range row {
		row[x] = (light.overlap[x]*open + light.leak[x] + n.dark) * c.DwellSeconds
	}
	return row, nil
}
