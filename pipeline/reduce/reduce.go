package reduce

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"runtime/debug"
	"slices"
	"sync/atomic"

	"go.uber.org/zap"

	"mirrorloom/fitsutil"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/kept"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/report"
	"mirrorloom/pipeline/sequence"
)

// Run reduces a night into opts.Out: cube.fits and elements.fits as asked,
// ledger.csv, run.json and report.html. Errors are one sentence that names the file and the
// cure.
func Run(ctx context.Context, opts Options) (result *Result, err error) {
	if err := opts.setDefaults(); err != nil {
		return nil, err
	}
	// The garbage collector must know the bound, or the heap grows past it
	// before it looks.
	previous := debug.SetMemoryLimit(opts.MemoryBytes - opts.MemoryBytes/16)
	defer debug.SetMemoryLimit(previous)

	r := &reduction{opts: opts, log: opts.Log}
	defer func() { r.close(err != nil && opts.Resume) }()
	if err := r.runStages(ctx, []stage{{"open", r.open}}); err != nil {
		return nil, err
	}
	if err := r.resume(); err != nil {
		return nil, err
	}
	var stages []stage
	if !r.resumed {
		stages = append(stages, stage{"pair", r.pair}, stage{"prepare", r.prepare}, stage{"calibrate", r.calibrate}, stage{"throughput", r.measureThroughput}, stage{"keep", r.savePrepared})
	}
	stages = append(stages, stage{"strips", r.strips})
	if r.toSky() {
		stages = append(stages, stage{"sky", r.bringToSky})
	}
	stages = append(stages, stage{"finish", r.finish})
	if r.hasForecast() {
		stages = append(stages, stage{"forecast", r.holdForecast})
	}
	if err := r.runStages(ctx, stages); err != nil {
		return nil, err
	}
	return r.result(ctx)
}

// stage is a part of a reduction, which tells how many bytes it read and wrote.
type stage struct {
	name string
	run  func(context.Context) (bytes int64, err error)
}

// runStages runs stages in turn and times them.
func (r *reduction) runStages(ctx context.Context, stages []stage) error {
	for _, step := range stages {
		if err := r.timed(step.name, func() (int64, error) { return step.run(ctx) }); err != nil {
			return err
		}
	}
	return nil
}

// reduction is a run in the making.
type reduction struct {
	opts    Options
	log     *zap.Logger
	seq     *sequence.Sequence
	night   *pair.Night
	camera  *exposure.Camera
	album   *exposure.Album
	roles   *roles
	masters *masters
	// correction is what is done to the science frames before they are decoded;
	// nil for nothing.
	correction *correction
	schema     product.Schema
	shift      *product.FieldShift // nil for none
	usage      *usage
	cube       *fitsutil.Cube
	shape      shape // of the products, once strips has begun
	element    *fitsutil.Cube

	optics optics
	onSky  onSky
	// through is what was found of the throughput; nil if it was not asked for.
	through   *throughput
	report    product.Calibration
	rectifier *rectifier
	quality   product.Quality
	stars     starSearch
	samples   restoredSamples
	// reached is the forecast beside what the cube has; nil without a forecast.
	reached   *product.Forecast
	badPixels int
	stages    []product.Stage
	// traffic counts what is read of frames and masters and written of products.
	traffic fitsutil.Traffic
	// light is the cube's for the report; nil where that reads it from the file.
	light *report.Light
	// unsynced are the rows that were written since the system was last asked to bring the
	// cube to the disk.
	unsynced int
	// looked counts the bytes that calibrate reads: see traffic.go.
	looked atomic.Int64

	// dependence is what the strips follow from, and state the digest of the file of
	// what the stages before them found, which resumed did not run.
	dependence *dependence
	state      kept.Digest
	resumed    bool
}

// close gives back everything; what was committed stays, and what a later run can go on
// with if that is to be left.
func (r *reduction) close(leave bool) {
	for _, c := range []*fitsutil.Cube{r.cube, r.element} {
		switch {
		case c == nil:
		case leave:
			c.Suspend()
		default:
			c.Abort()
		}
	}
	if r.masters != nil {
		r.masters.file.Close() // only read from
	}
	if r.album != nil {
		r.album.Close() // only read from
	}
	if !leave {
		os.RemoveAll(r.scratch())
	}
}

// scratch is the folder for unpacked frames and masters.
func (r *reduction) scratch() string { return filepath.Join(r.opts.Out, "scratch") }

// open reads the sequence, and looks at all that the reduction depends on.
func (r *reduction) open(ctx context.Context) (int64, error) {
	var err error
	if r.seq, err = sequence.Read(ctx, r.opts.Sequence); err != nil {
		return 0, err
	}
	if err := checkCycles(r.seq, r.opts.Cycles); err != nil {
		return 0, fmt.Errorf("%s: %w", r.opts.Sequence, err)
	}
	if err := r.readStars(); err != nil {
		return 0, err
	}
	if r.camera, err = exposure.NewCamera(&r.seq.Profile.Detector); err != nil {
		return 0, err
	}
	if r.dependence, err = r.dependsOn(ctx); err != nil {
		return 0, err
	}
	if err := os.MkdirAll(r.scratch(), 0o755); err != nil {
		return 0, fmt.Errorf("make a scratch folder: %w", err)
	}
	return 0, nil
}

// pair pairs the night with the sequence, and opens the frames.
func (r *reduction) pair(ctx context.Context) (_ int64, err error) {
	r.night, err = pair.Run(ctx, r.seq, pair.Options{
		Night: r.opts.Night, ScratchDir: r.scratch(), Workers: r.opts.Workers,
		Audit: r.opts.Recipe.Repair.Use != useOff, AsLabelled: r.opts.AsLabelled,
		AuditProgress: func(done, total int) { r.opts.Progress("audit", done, total) },
	}, func(done, total int) { r.opts.Progress("pair", done, total) })
	if err != nil {
		return 0, err
	}
	if err := r.openFrames(); err != nil {
		return 0, err
	}
	r.heedAudit()
	return 0, nil
}

// openFrames opens the frames of a paired night, and gives them their roles.
func (r *reduction) openFrames() (err error) {
	calibrates := r.opts.Recipe.Detector.Use != useOff
	if r.album, err = exposure.OpenAlbum(sources(r.seq, r.night, r.opts.Recipe, r.opts.Cycles), r.scratch()); err != nil {
		return err
	}
	r.album.CountInto(&r.traffic)
	if r.roles, err = assign(r.seq, r.album.Frames, calibrates, r.opts.Cycles); err != nil {
		return err
	}
	return r.checkFlux()
}

// heedAudit says what the audit found.
func (r *reduction) heedAudit() {
	found := r.night.Audit
	if found == nil {
		return
	}
	for _, text := range found.Warnings() {
		r.warn("%s", text)
	}
	if found.Inverted() {
		r.degrade("every mask of the night is inverted: all light is negative")
	}
}

// prepare makes the masters.
func (r *reduction) prepare(ctx context.Context) (int64, error) {
	p := &prepare{
		camera: r.camera, album: r.album, frames: r.roles.calibration, recipe: r.opts.Recipe.Detector,
		workers: r.opts.Workers, memory: r.opts.MemoryBytes - runtimeBytes, traffic: &r.traffic,
	}
	var err error
	r.badPixels, err = p.run(ctx, r.scratch(), func(rows int) { r.opts.Progress("prepare", rows, r.camera.Rows) })
	if err != nil {
		return 0, err
	}
	if r.masters, err = openMasters(r.scratch()); err != nil {
		return 0, err
	}
	r.masters.file.CountInto(&r.traffic)
	c := r.roles.calibration
	frames := len(c.bias) + len(c.dark) + len(c.off) + len(c.lamps.on) + len(c.lamps.off)
	return r.frameBytes()*int64(frames) + r.masterBytes(), nil
}

// strips decodes and rectifies.
func (r *reduction) strips(ctx context.Context) (int64, error) {
	code, err := r.code()
	if err != nil {
		return 0, err
	}
	s := shape{
		columns: r.camera.Columns, rows: r.camera.Rows, slots: r.seq.V, elements: r.seq.N(),
		elementCube: r.opts.Elements, cube: r.opts.Cube,
	}
	d := r.newDecoder(code, r.roles.slots, r.correction)
	r.scienceRepair(d)
	if d.neighbours, err = r.optics.neighbourTerm(d); err != nil {
		return 0, err
	}
	s.uniform = d.code.VarianceUniform()
	s.voxels = r.schema.Grid.Count
	r.shape = s
	if s.cube && !r.toSky() && !r.resumed {
		r.light = report.NewLight(s.elements, s.rows, s.voxels)
	}
	var stuck *stuckLight
	if s.cube {
		if r.rectifier, err = newRectifier(r.optics.geometry, r.schema.Axis(), s, r.usage, r.opts.Workers); err != nil {
			return 0, fmt.Errorf("the wavelength grid of %s: %w", r.gridSource(), err)
		}
		if err := r.shiftField(); err != nil {
			return 0, err
		}
		r.rectifier.response, r.rectifier.pixelVariance = r.optics.response, r.optics.pixelVariance()
		s.margin = r.rectifier.margin(s.rows)
		if stuck = newStuckLight(r.optics.stuck, &r.optics.geometry, s.columns, s.uniform); stuck != nil {
			s.margin += 2 * lightRows
			r.rectifier.low = r.optics.stuck.low()
		}
	}
	h, err := s.heights(r.opts.MemoryBytes - r.heldBytes())
	if err != nil {
		return 0, err
	}
	r.log.Debug("strips", zap.Int("rows", h.strip), zap.Int("cube_rows", h.out))
	w := &sweep{
		shape: s, heights: h, decoder: d, rectify: r.rectifier, workers: r.opts.Workers,
		reader:   r.newReader(r.roles.slots, r.roles.calibration.scienceSeconds, masterOff, r.correction),
		pixel:    r.optics.pixel,
		stuck:    stuck,
		progress: func(rows int) { r.opts.Progress("strips", rows, s.rows) },
	}
	if s.cube {
		w.pixelVariance = r.writePixelVariance
	}
	w.reader.restore = d.repair != nil
	if w.reader.edges, err = r.edges(ctx, d); err != nil {
		return 0, err
	}
	w.reader.scale = &d.scale
	keeper, err := r.newKeeper(w)
	if err != nil {
		return 0, err
	}
	w.elements, w.boundary = r.element, keeper.boundary
	w.sink = func(_ context.Context, out *outStrip) error {
		err := r.write(w, out)
		if err == nil {
			keeper.wrote(out)
		}
		return err
	}
	if err := keeper.end(w.run(ctx)); err != nil {
		return 0, err
	}
	var flags int16
	r.quality, flags = sum(w.quality, s.elements*s.rows*s.voxels, d.repair != nil && d.repair.pursuit != nil)
	r.samples = w.samples
	if w.reader.edges != nil {
		hits := w.reader.edges.count()
		r.quality.Hits = &hits
		r.quality.Restored += hits
	}
	r.repairQuality(w)
	r.judge(flags)
	return r.stripBytes(s) * int64(s.rows-w.before.decoded) / int64(s.rows), nil
}

// code gives the sequence's code, and refuses one whose rows are not those that
// decoding inverts: an m-sequence of another polynomial is as good a code, but
// not the one of this version.
func (r *reduction) code() (*hadamard.Code, error) {
	code, err := hadamard.New(hadamard.Family(r.seq.Family), r.seq.V)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", r.opts.Sequence, err)
	}
	for _, i := range r.seq.StepsOf(sequence.Science) {
		if !slices.Equal(r.seq.Code[i], code.Row(r.seq.Steps[i].Row)) {
			return nil, fmt.Errorf("%s: step %d does not show row %d of the %s code of %d columns (CODEPOLY %d, here %d); plan the sequence again with this version", r.opts.Sequence, r.seq.Steps[i].Step, r.seq.Steps[i].Row, r.seq.Family, r.seq.V, r.seq.Poly, code.Poly())
		}
	}
	return code, nil
}

// gridSource is the file to mend if the grid does not suit the instrument.
func (r *reduction) gridSource() string {
	if r.opts.Recipe.ownGrid() {
		return r.opts.Recipe.Name
	}
	return filepath.Join(r.opts.Sequence, "profile.yaml")
}

// heldBytes is the memory of what calibrate keeps for the strips, and of what the
// rectifier needs more than usual.
func (r *reduction) heldBytes() int64 {
	held := int64(r.shape.elements) * int64(r.shape.rows) * report.LightBytes
	if r.rectifier != nil {
		held = r.rectifier.fieldBytes()
	}
	if r.optics.pixel == nil {
		return held
	}
	return held + exposureBytes*int64(len(r.optics.pixel.Factor))
}

// newDecoder decodes the frames of slots, corrected so; nil for uncorrected ones.
func (r *reduction) newDecoder(code *hadamard.Code, slots [][]*exposure.Frame, c *correction) *decoder {
	d := &decoder{
		code: hadamard.NewDecoder(code), columns: r.camera.Columns, slots: r.seq.V,
		elementColumns: r.seq.ElementColumns(), darkColumns: r.seq.DarkColumns(),
		k: float64(code.K()), photonExcess: r.camera.PhotonExcess, scale: newSlotScale(slots, c),
		shines: r.optics.stuck.shinesOn,
	}
	if !d.code.VarianceUniform() {
		d.sumQuiet()
	}
	if c != nil && c.terms.corrects() {
		d.terms = newSlotTerms(c.terms, slots)
	}
	return d
}

// write takes a strip of the cube to the file and counts its voxels.
func (r *reduction) write(w *sweep, out *outStrip) error {
	if unknown := r.optics.unknown(); unknown != 0 {
		for i := range out.flags {
			out.flags[i] |= unknown
		}
	}
	r.stars.look(out, w.shape)
	for row := range out.h {
		y := out.y0 + row
		w.quality[y].count(out, row, w.shape.elements, w.shape.voxels, r.usage.row(y))
		out.addLight(r.light, row, w.shape)
	}
	if err := out.write(r.cube, w.shape.voxels); err != nil {
		return err
	}
	if r.unsynced += out.h; !r.toSky() && r.unsynced*w.shape.elements*bytesFloat >= syncRun {
		r.cube.BeginSync()
		r.unsynced = 0
	}
	return nil
}

// syncRun is how many bytes of a plane are written before the system is asked to bring them
// to the disk: fewer would make the disk seek, and more would leave much to wait for at the
// end.
const syncRun = 256 << 10

// newReader reads the frames of slots, exposed so long, whose light without any
// open mirror is in master dim, and corrects them so.
func (r *reduction) newReader(slots [][]*exposure.Frame, seconds float64, dim int, c *correction) *stripReader {
	return &stripReader{
		correction: c,
		camera:     r.camera, album: r.album, slots: slots, masters: r.masters, seconds: seconds, dim: dim,
		workers: r.opts.Workers, scratch: make([]exposure.Scratch, r.opts.Workers), sums: make([][]float32, r.opts.Workers),
		struck: make([][]struckSample, r.opts.Workers), tally: newTally(slots),
	}
}
