package rehearse

import (
	"errors"
	"fmt"
	"os"
	"slices"
	"sync"
	"sync/atomic"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/sequence"
)

// rehearsal is a night being made.
type rehearsal struct {
	opts     Options
	seq      *sequence.Sequence
	scene    *Scene
	optics   *optics
	beams    *beams
	detector *detector
	fates    []fate
	steps    []stepPlan
	sources  []source
	maps     *efficiencyMap // nil for a perfect instrument
	colour   *weights       // of layerColour; nil without that fault
	beside   *weights       // of layerNeighbour; nil without that fault
	leakSize float64
	leakMap  *leakMap
	persist  float64
	redraws  bool // whether some fault draws each frame anew
	dwell    float64

	dir      string
	progress func(done, total int)
	scratch  *os.File
	truth    *fitsutil.Cube

	mu        sync.Mutex
	done      int
	saturated atomic.Int64
	bytes     atomic.Int64
}

// source is one light of the night: the sky or a lamp with its filter.
type source struct {
	light *light
	scale float64
	sky   bool
	// used marks the beams that some step opens, all where mirrors leak.
	used []bool
}

// stepPlan is what is known of a step before any pixel.
type stepPlan struct {
	source  int // index of its light; -1 for a bias or dark
	mixture *mixture
	// factor turns electrons per second into those expected: throughput times
	// exposure time times the lamp's scale.
	factor float64
	// view is how the step sees the sky.
	view viewing
	// light is the sky's in that view, where frames are drawn one by one.
	light *light
}

func newRehearsal(seq *sequence.Sequence, scene *Scene, opts Options) (*rehearsal, error) {
	if seq.N() == 0 || seq.Profile == nil || seq.Target == nil {
		return nil, errors.New("the sequence has no element, profile or target; read it with sequence.Read")
	}
	if slices.ContainsFunc(seq.Steps, func(s sequence.Step) bool { return s.MaskID == "" }) {
		return nil, errors.New("the sequence's masks have no names; write it first, or read it")
	}
	if scene.Atmosphere != nil || len(seq.StepsOf(sequence.RefStar)) > 0 {
		return nil, errors.New("atmosphere and reference stars are not drawn by this version; leave them out of scene and target")
	}
	g := nominalGeometry(seq)
	if !opts.Perfect {
		g = offsetGeometry(g, seq.Profile.Detector, opts.Seed)
	}
	r := &rehearsal{opts: opts, seq: seq, scene: scene, optics: newOptics(seq, g)}
	r.detector = newDetector(seq.Profile.Detector, opts.Seed, opts.Perfect, opts.Noiseless)
	r.fates = newFates(seq, opts.Seed, opts.Faults)
	r.dwell = scienceDwell(seq)
	r.prepareFaults()
	if err := r.prepareSources(); err != nil {
		return nil, err
	}
	return r, r.planSteps()
}

// scienceDwell is the exposure time that truth speaks of.
func scienceDwell(seq *sequence.Sequence) float64 {
	if steps := seq.StepsOf(sequence.Science); len(steps) > 0 {
		return seq.Steps[steps[0]].ExptimeSeconds
	}
	return seq.Target.DwellSeconds
}

func (r *rehearsal) prepareFaults() {
	size := func(name string) float64 { s, _ := sizeOf(r.opts.Faults, name); return s }
	r.leakSize, r.persist = size(Leak), size(Persist)
	r.beams = newBeams(r.optics, r.leakSize > 0)
	if r.leakSize > 0 {
		r.leakMap = r.optics.newLeakMap(r.opts.Seed, r.beams)
	}
	if size(Colour) > 0 {
		r.colour = r.optics.newWeights(r.optics.colourWeight)
	}
	if d := size(Neighbour); d > 0 {
		center := r.optics.geometry.CenterNM
		r.beside = r.optics.newWeights(func(nm float64) float64 { return d * nm / center })
	}
	if !r.opts.Perfect {
		r.maps = r.optics.newEfficiencyMap(r.opts.Seed, r.beams)
	}
	r.redraws = size(Seeing) > 0 || size(Guide) > 0 || size(Shift) > 0
}

// view is how a step with a fate sees the sky.
func (r *rehearsal) view(f *fate) viewing {
	element := float64(r.seq.ElementMirrors()) * r.optics.field.arcsecPerU
	return viewing{seeing: r.scene.SeeingFWHMArcsec * f.seeing, du: f.guideU * element, dw: f.guideW * element}
}

func (r *rehearsal) prepareSources() error {
	clear := fate{seeing: 1}
	sky := r.optics.newSkyLight(r.scene, r.view(&clear))
	r.sources = []source{{light: sky, scale: 1, sky: true}}
	keys, steps := lampSteps(r.seq)
	for _, key := range keys {
		lamp, err := r.optics.newLampLight(key.lamp, r.opts.Seed, r.opts.Perfect)
		if err != nil {
			return err
		}
		r.sources = append(r.sources, source{light: lamp, scale: r.optics.lampScale(lamp, r.beams, steps[key])})
		if r.sources[len(r.sources)-1].scale == 0 {
			return fmt.Errorf("lamp %q gives no light on the detector in its %s frames; choose another lamp", key.lamp, key.kind)
		}
	}
	for i := range r.sources {
		r.sources[i].used = make([]bool, len(r.beams.list))
	}
	return nil
}

func (r *rehearsal) planSteps() error {
	keys, _ := lampSteps(r.seq)
	r.steps = make([]stepPlan, len(r.seq.Steps))
	for i, st := range r.seq.Steps {
		f := &r.fates[i]
		p := &r.steps[i]
		p.source = -1
		switch st.Kind {
		case sequence.Bias, sequence.Dark:
			continue
		case sequence.Flat, sequence.Arc:
			p.source = 1 + slices.Index(keys, lampKey{st.Kind, st.Lamp})
		default:
			p.source = 0
		}
		p.mixture = r.beams.newMixture(r.beams.open(r.seq, f.shown), r.leakSize > 0, r.beside != nil)
		p.factor = st.ExptimeSeconds * r.sources[p.source].scale
		if p.source == 0 {
			p.factor *= f.throughput
			p.mixture.colour, p.mixture.lines = f.colour, f.skyLines-1
			p.view = r.view(f)
		}
		for _, b := range slices.Concat(p.mixture.open, p.mixture.shut) {
			r.sources[p.source].used[b] = true
		}
	}
	if !r.opts.NoTruth {
		for j := range r.beams.n {
			r.sources[0].used[j] = true
		}
	}
	return nil
}

// advance tells that more units of work are done.
func (r *rehearsal) advance(units int) {
	r.mu.Lock()
	defer r.mu.Unlock()
	r.done += units
	if r.progress != nil {
		r.progress(r.done, r.total())
	}
}

// total counts the units of work: a raw row of all frames one, a frame one.
func (r *rehearsal) total() int { return len(r.detector.rows) + len(r.seq.Steps) }

func (r *rehearsal) summary() *Summary {
	s := &Summary{Columns: r.detector.rawColumns, Rows: len(r.detector.rows), Bytes: r.bytes.Load()}
	for i := range r.fates {
		if r.fates[i].lost {
			s.Lost++
		} else {
			s.Frames++
		}
	}
	if n := len(r.seq.StepsOf(sequence.Science)); n > 0 {
		s.SaturatedFraction = float64(r.saturated.Load()) / float64(n*r.optics.columns*r.optics.rows)
	}
	return s
}
