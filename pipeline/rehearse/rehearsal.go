package rehearse

import (
	"errors"
	"fmt"
	"math"
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
	air      *air           // nil without an atmosphere
	sights   []*sightline   // by step; nil where a step does not look at the sky
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
	// scene is what a light of the sky was made from.
	scene *Scene
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
	// light is the sky's in that view, where sources or frames are drawn one by one.
	light *light
}

func newRehearsal(seq *sequence.Sequence, scene *Scene, opts Options) (*rehearsal, error) {
	if seq.N() == 0 || seq.Profile == nil || seq.Target == nil {
		return nil, errors.New("the sequence has no element, profile or target; read it with sequence.Read")
	}
	if slices.ContainsFunc(seq.Steps, func(s sequence.Step) bool { return s.MaskID == "" }) {
		return nil, errors.New("the sequence's masks have no names; write it first, or read it")
	}
	if len(seq.StepsOf(sequence.RefStar)) > 0 && scene.RefStar == nil {
		return nil, errors.New("the sequence has refstar steps and the scene has no star for them; add refstar to the scene")
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

// view is how a step with a fate sees a scene.
func (r *rehearsal) view(s *Scene, f *fate, sight *sightline) viewing {
	element := float64(r.seq.ElementMirrors()) * r.optics.field.arcsecPerU
	return viewing{sight: sight, seeing: s.SeeingFWHMArcsec * f.seeing, du: f.guideU * element, dw: f.guideW * element}
}

func (r *rehearsal) prepareSources() error {
	clear := fate{seeing: 1}
	var mean *sightline
	if r.air = r.optics.newAir(r.scene); r.air != nil {
		var err error
		if r.sights, mean, err = r.sightlines(); err != nil {
			return err
		}
	}
	addSky := func(s *Scene, sight *sightline) {
		light := r.optics.newSkyLight(s, r.view(s, &clear, sight))
		r.sources = append(r.sources, source{light: light, scale: 1, sky: true, scene: s})
	}
	addSky(r.scene, mean)
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
	if len(r.seq.StepsOf(sequence.RefStar)) > 0 {
		addSky(r.scene.StarScene(r.wideElement()), nil)
	}
	for i := range r.sources {
		r.sources[i].used = make([]bool, len(r.beams.list))
	}
	return nil
}

// skySource is the index of the light that the truth speaks of.
const skySource = 0

// wideElement is where the middle of the refstar steps' wide element lies, arc seconds
// east and north of the field's centre.
func (r *rehearsal) wideElement() (east, north float64) {
	f, strips := r.optics.field, r.beams.strips
	open := r.seq.Target.Calibration.RefStar.Elements
	middle := float64(strips[open[0]].First+strips[open[1]].Last) / 2
	return f.sky((middle-f.uMiddle)*f.arcsecPerU, 0)
}

// sight is the air of a step; nil for none.
func (r *rehearsal) sight(step int) *sightline {
	if r.sights == nil {
		return nil
	}
	return r.sights[step]
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
		case sequence.RefStar:
			p.source = len(r.sources) - 1
		default:
			p.source = skySource
		}
		p.mixture = r.beams.newMixture(r.beams.open(r.seq, f.shown), r.leakSize > 0, r.beside != nil)
		p.factor = st.ExptimeSeconds * r.sources[p.source].scale
		if from := &r.sources[p.source]; from.sky {
			p.factor *= f.throughput
			p.mixture.colour, p.mixture.lines = f.colour, f.skyLines-1
			p.view = r.view(from.scene, f, r.sight(i))
		}
		for _, b := range slices.Concat(p.mixture.open, p.mixture.shut) {
			r.sources[p.source].used[b] = true
		}
	}
	if !r.opts.NoTruth {
		for j := range r.beams.n {
			r.sources[skySource].used[j] = true
		}
	}
	if r.air != nil && r.air.refracts {
		r.placeNodes()
	}
	return nil
}

// placeNodes lays out the nodes of images for the sharpest of the steps and the one
// that refraction moves most.
func (r *rehearsal) placeNodes() {
	seeing, tanZ := math.Inf(1), 0.0
	for _, step := range r.steps {
		if step.view.sight != nil {
			seeing, tanZ = min(seeing, step.view.seeing), max(tanZ, step.view.sight.tanZ)
		}
	}
	r.air.placeNodes(seeing, tanZ)
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
