package audit

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"math"
	"runtime"
	"slices"
	"time"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/sequence"
)

// Frame is a science frame of the night. Its Source.Step is the index of the step that
// it is labelled with, or -1 for a frame more than there are steps.
type Frame struct {
	exposure.Source
	// Start is DATE-OBS; the zero time where it is not known.
	Start time.Time
}

// Options of Run.
type Options struct {
	// Pedestals are frames without light, as long as the science frames if there are
	// such; none if there are none.
	Pedestals []exposure.Source
	// ScratchDir receives packed frames.
	ScratchDir string
	// Workers read at the same time; 0 for one a processor.
	Workers int
	// Progress, which may be nil, is called as cycles get done.
	Progress func(done, total int)
}

// Report is what Run found.
type Report struct {
	// Skipped says why there was no audit; empty if there was one.
	Skipped string
	Cycles  []CycleReport
}

// CycleReport is the verdict on one cycle.
type CycleReport struct {
	*Verdict
	Cycle int
	// Frames are the cycle's frames, which Verdict counts; Steps the index of the step
	// of each code row, -1 for none.
	Frames []Frame
	Steps  []int
	// Rows is the number of detector rows in the sample.
	Rows int
}

// maxPedestals is how many frames without light are averaged: enough that their noise
// is below that of one frame.
const maxPedestals = 4

// Run audits the science frames of a night, cycle by cycle. The sample of a cycle
// starts with a thousand pixels and grows until every other pairing of two frames is
// excluded or harmless, or more pixels would not help, the detector's rows run out, or
// the sums would take longer than they may. The result does not depend on the workers.
//
// Errors are those of reading, the context's, and a *hadamard.NoCodeError.
func Run(ctx context.Context, seq *sequence.Sequence, frames []Frame, opts Options) (*Report, error) {
	code, why, err := codeOf(seq)
	if err != nil || why != "" {
		return &Report{Skipped: why}, err
	}
	if opts.Workers <= 0 {
		opts.Workers = runtime.GOMAXPROCS(0)
	}
	camera, err := exposure.NewCamera(&seq.Profile.Detector)
	if err != nil {
		return nil, err
	}
	a := &audit{seq: seq, code: code, camera: camera, opts: opts, place: places(seq, frames)}
	cycles := byCycle(seq, frames)
	report := &Report{}
	for i, own := range cycles {
		r, err := a.cycle(ctx, i+1, own)
		if err != nil {
			return nil, err
		}
		if r != nil {
			report.Cycles = append(report.Cycles, *r)
		}
		if opts.Progress != nil {
			opts.Progress(i+1, len(cycles))
		}
	}
	if len(report.Cycles) == 0 {
		report.Skipped = "no cycle has frames enough"
	}
	return report, nil
}

// codeOf gives the code, or why the dark columns cannot judge it.
func codeOf(seq *sequence.Sequence) (*hadamard.Code, string, error) {
	g := len(seq.DarkColumns())
	if hadamard.Family(seq.Family) == hadamard.SlitScan || g == 0 {
		return nil, "the sequence has no dark columns", nil
	}
	code, err := hadamard.New(hadamard.Family(seq.Family), seq.V)
	if err != nil {
		return nil, "", err
	}
	checks, err := hadamard.NewChecks(code, seq.DarkColumns())
	if err != nil {
		return nil, "", err
	}
	if !checks.Reliable() {
		return nil, fmt.Sprintf("the sequence has %d dark columns, of the %.0f that %d code columns need (2 log2 v)", g, math.Ceil(2*math.Log2(float64(seq.V))), seq.V), nil
	}
	for _, i := range seq.StepsOf(sequence.Science) {
		if !slices.Equal(seq.Code[i], code.Row(seq.Steps[i].Row)) {
			return nil, "the sequence's code is not that of this version", nil
		}
	}
	return code, "", nil
}

// byCycle sorts frames by the cycle of their step; a frame more than there are steps
// goes to the last.
func byCycle(seq *sequence.Sequence, frames []Frame) [][]Frame {
	last := 0
	for _, i := range seq.StepsOf(sequence.Science) {
		last = max(last, seq.Steps[i].Cycle)
	}
	cycles := make([][]Frame, last)
	for _, f := range frames {
		c := last
		if f.Step >= 0 {
			c = seq.Steps[f.Step].Cycle
		}
		cycles[c-1] = append(cycles[c-1], f)
	}
	return cycles
}

// places gives each frame, by path, its place in the night, -1/2 to 1/2: by time if all
// have one, else by step.
func places(seq *sequence.Sequence, frames []Frame) map[string]float64 {
	timed := !slices.ContainsFunc(frames, func(f Frame) bool { return f.Start.IsZero() })
	at := func(f Frame) float64 {
		if timed {
			return f.Start.Sub(frames[0].Start).Seconds()
		}
		if f.Step < 0 {
			return float64(len(seq.Steps))
		}
		return float64(f.Step)
	}
	first, last := math.Inf(1), math.Inf(-1)
	for _, f := range frames {
		first, last = min(first, at(f)), max(last, at(f))
	}
	place := map[string]float64{}
	for _, f := range frames {
		if last > first {
			place[f.Path] = (at(f)-first)/(last-first) - 0.5
		}
	}
	return place
}

type audit struct {
	seq    *sequence.Sequence
	code   *hadamard.Code
	camera *exposure.Camera
	opts   Options
	place  map[string]float64
}

// The sample of a cycle: at first so many samples, at most so many, and no more than
// keep their sums, samples times frames squared, below sampleWork.
const (
	firstSamples = 1 << 10
	leastSamples = 1 << 13
	mostSamples  = 1 << 16
	sampleWork   = 16e9
)

// fastest is how many times as large a sample gets at once: what it is expected to need
// is known poorly while it is small.
const fastest = 4

// cleanings is how often hits are looked for before a sample is judged at its size.
const cleanings = 3

// cycle audits one cycle; nil if it has not enough frames to tell anything.
func (a *audit) cycle(ctx context.Context, number int, frames []Frame) (_ *CycleReport, err error) {
	c, steps := a.problem(number, frames)
	if missing := a.seq.V - len(frames); missing > len(a.seq.DarkColumns())/2 {
		return nil, nil
	}
	s := &sampler{camera: a.camera, workers: a.opts.Workers, rows: candidateRows(a.seq), offsets: levelVariances(a.camera)}
	if s.album, err = open(frames, a.opts.ScratchDir); err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, s.album.Close()) }()
	if dark := a.opts.Pedestals; len(dark) > 0 {
		if s.pedestals, err = exposure.OpenAlbum(dark[:min(len(dark), maxPedestals)], a.opts.ScratchDir); err != nil {
			return nil, err
		}
		defer func() { err = errors.Join(err, s.pedestals.Close()) }()
	}
	perRow := max(1, a.camera.Columns/binned)
	most := sampleWork / float64(len(frames)*len(frames))
	limit := int(min(max(most, leastSamples), mostSamples)) / perRow
	report := &CycleReport{Cycle: number, Frames: frames, Steps: steps}
	c.MostPixels = min(limit, len(s.rows)) * perRow
	var st *state
	for rows := (firstSamples + perRow - 1) / perRow; ; {
		more, err := s.grow(ctx, min(rows, max(limit, 1)), st)
		if err != nil {
			return nil, err
		}
		for range cleanings {
			c.Gram, c.Parts, c.Level = s.gram, s.parts, s.level
			before := st
			if report.Verdict, st, err = judge(c); err != nil {
				return nil, err
			}
			if st == nil || st.alike(before) || s.clean(st) == 0 {
				break
			}
		}
		report.Rows = s.used
		if report.Wanted <= report.Pixels || !more || rows >= limit {
			return report, ctx.Err()
		}
		times := math.Ceil(float64(report.Wanted) / float64(report.Pixels))
		rows *= int(min(max(times, 2), fastest))
	}
}

func open(frames []Frame, scratch string) (*exposure.Album, error) {
	sources := make([]exposure.Source, len(frames))
	for i, f := range frames {
		sources[i] = f.Source
	}
	return exposure.OpenAlbum(sources, scratch)
}

// problem is the cycle without its sums, and the step of each code row.
func (a *audit) problem(number int, frames []Frame) (*Cycle, []int) {
	c := &Cycle{
		Code: a.code, Dark: a.seq.DarkColumns(), Elements: a.seq.ElementColumns(),
		Pairing: make([]int, a.seq.V), Mirrors: max(1, a.seq.ElementMirrors()),
	}
	steps := make([]int, a.seq.V)
	for k := range steps {
		steps[k], c.Pairing[k] = none, none
	}
	for _, i := range a.seq.StepsOf(sequence.Science) {
		if st := a.seq.Steps[i]; st.Cycle == number {
			steps[st.Row] = i
			c.Order = append(c.Order, st.Row)
		}
	}
	timed := true
	for m, f := range frames {
		c.Place = append(c.Place, a.place[f.Path])
		timed = timed && !f.Start.IsZero()
		c.Time = append(c.Time, m)
		if f.Step >= 0 {
			c.Pairing[a.seq.Steps[f.Step].Row] = m
		} else {
			c.Spare = append(c.Spare, m)
		}
	}
	slices.SortStableFunc(c.Time, func(x, y int) int { return cmp.Or(frames[x].Start.Compare(frames[y].Start), cmp.Compare(x, y)) })
	if !timed {
		c.Time = nil
	}
	return c, steps
}
