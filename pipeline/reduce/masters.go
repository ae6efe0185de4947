package reduce

import (
	"context"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
)

// The masters of the night lie in a scratch file while a reduction runs, one
// image each over the active pixels, in the order of these constants.
const (
	masterBias     = iota // electrons above the overscan or the profile's level
	masterDark            // electrons per second
	masterOff             // light of all-off frames, electrons per second
	masterLampOff         // light of the lamp's all-off frames, electrons per second
	masterVariance        // of what is taken off one science exposure, electrons squared
	masterBad             // flags
	masterCount
)

const mastersFile = "masters.fits"

// calibration is the frames of each kind that prepare uses, and the exposure
// times in seconds: of the science frames, of the darks, of the all-off frames.
// lamps are those of the flats.
type calibration struct {
	bias, dark, off                         []*exposure.Frame
	lamps                                   lamps
	scienceSeconds, darkSeconds, offSeconds float64
}

// prepare makes the masters, strip by strip.
type prepare struct {
	camera  *exposure.Camera
	album   *exposure.Album
	frames  calibration
	recipe  DetectorRecipe
	workers int
	memory  int64 // for buffers
	traffic *fitsutil.Traffic
}

// deadMargin are the rows beyond a strip that the search for dead pixels needs.
var deadMargin = calib.DefaultDeadRule(0).Window

// run writes the masters into dir and returns their number of bad pixels.
func (p *prepare) run(ctx context.Context, dir string, progress func(rows int)) (bad int, err error) {
	var specs []fitsutil.ImageSpec
	for i, name := range []string{"BIAS", "DARK", "OFF", "LAMPOFF", "TAKENVAR", "BAD"} {
		bitpix := -32
		if i == masterBad {
			bitpix = 16
		}
		specs = append(specs, fitsutil.ImageSpec{Name: name, BITPIX: bitpix, Axes: []int{p.camera.Columns, p.camera.Rows}})
	}
	out, err := fitsutil.CreateCube(filepath.Join(dir, mastersFile), fitsutil.NewHeader(), specs)
	if err != nil {
		return 0, err
	}
	defer out.Abort()
	out.CountInto(p.traffic)
	h := p.height()
	for y0 := 0; y0 < p.camera.Rows; y0 += h {
		y1 := min(y0+h, p.camera.Rows)
		s, err := p.strip(ctx, y0, y1)
		if err != nil {
			return 0, err
		}
		for i, data := range s.images {
			if err := out.WriteStrip(i, y0, y1-y0, 0, 1, data); err != nil {
				return 0, err
			}
		}
		if err := out.WriteStrip(masterBad, y0, y1-y0, 0, 1, s.bad); err != nil {
			return 0, err
		}
		for _, f := range s.bad {
			if f != 0 {
				bad++
			}
		}
		progress(y1)
	}
	return bad, out.Commit()
}

// height is the rows of a strip that half of the memory holds, all frames of
// the most numerous kind at once.
func (p *prepare) height() int {
	most := max(len(p.frames.bias), len(p.frames.dark), len(p.frames.off), len(p.frames.lamps.on), len(p.frames.lamps.off), 1)
	perRow := int64(most+8) * int64(p.camera.Columns) * bytesFloat
	return int(min(int64(p.camera.Rows), max(1, p.memory/2/perRow-2*int64(deadMargin))))
}

// masterStrip is the masters of some rows.
type masterStrip struct {
	images [masterBad][]float32 // all but masterBad
	bad    []calib.Flag
}

func (p *prepare) strip(ctx context.Context, y0, y1 int) (*masterStrip, error) {
	n := (y1 - y0) * p.camera.Columns
	s := &masterStrip{bad: make([]calib.Flag, n)}
	for i := range s.images {
		s.images[i] = make([]float32, n)
	}
	if p.recipe.Use == useOff {
		return s, nil
	}
	// The search for dead pixels needs the rows around.
	first, last := y0, y1
	if len(p.frames.lamps.on) > 0 {
		first, last = max(0, y0-deadMargin), min(p.camera.Rows, y1+deadMargin)
	}
	around, err := p.stack(ctx, p.frames.bias, first, last, s.bad, y0)
	if err != nil {
		return nil, err
	}
	bias := around
	if bias != nil {
		bias = around[(y0-first)*p.camera.Columns:][:n]
	}
	faint := stacking{noise: math.Sqrt(p.camera.NoisiestVariance())}
	dark, err := p.stackRows(ctx, p.frames.dark, y0, y1, s.bad, y0, faint)
	if err != nil {
		return nil, err
	}
	// Hot pixels look like cosmic rays: where darks have told them, and all-off frames are
	// too few to be compared, each is searched by itself.
	faint.clean = dark != nil && len(p.frames.off) < fewestCompared
	off, err := p.stackRows(ctx, p.frames.off, y0, y1, s.bad, y0, faint)
	if err != nil {
		return nil, err
	}
	lampOff, err := p.stack(ctx, p.frames.lamps.off, y0, y1, s.bad, y0)
	if err != nil {
		return nil, err
	}
	p.combine(s, y0, bias, dark, off, lampOff)
	if err := p.findHot(ctx, s, dark != nil); err != nil {
		return nil, err
	}
	return s, p.findDead(ctx, s, y0, first, last, around)
}

// fewestCompared frames tell by comparison which of their samples are struck, if their
// noise is known; fewestScattered tell their noise as well.
const (
	fewestCompared  = 3
	fewestScattered = 5
)

// stacking is how frames are combined.
type stacking struct {
	// noise is that of a sample without light, electrons, for frames with little light,
	// and serves where they are too few to tell; 0 for others.
	noise float64
	// clean takes cosmic rays out of each frame first.
	clean bool
}

// stack takes the clipped mean of frames over rows y0..y1-1, in electrons
// above the level; nil without frames. Pixels without a value are marked in
// bad, whose first row is badY0.
func (p *prepare) stack(ctx context.Context, frames []*exposure.Frame, y0, y1 int, bad []calib.Flag, badY0 int) ([]float32, error) {
	return p.stackRows(ctx, frames, y0, y1, bad, badY0, stacking{})
}

// stackRows is stack, with a way to combine.
func (p *prepare) stackRows(ctx context.Context, frames []*exposure.Frame, y0, y1 int, bad []calib.Flag, badY0 int, how stacking) ([]float32, error) {
	if len(frames) == 0 {
		return nil, nil
	}
	n := (y1 - y0) * p.camera.Columns
	samples := make([][]float32, len(frames))
	scratch := make([]exposure.Scratch, p.workers)
	blank := make([][]calib.Flag, len(frames))
	err := parallel.Do(ctx, p.workers, len(frames), func(worker, i int) error {
		samples[i] = make([]float32, n)
		mark := func(flags []calib.Flag, x, y, w int) {
			if blank[i] == nil {
				blank[i] = make([]calib.Flag, n)
			}
			p.camera.Merge(blank[i], y0, flags, x, y, w)
		}
		if _, err := p.camera.Read(samples[i], frames[i].Image, y0, y1, &scratch[worker], mark); err != nil {
			return err
		}
		if how.clean {
			var err error
			if samples[i], err = p.cleaned(frames[i], y0, y1, &scratch[worker]); err != nil {
				return err
			}
		}
		return p.album.Done(frames[i])
	})
	if err != nil {
		return nil, err
	}
	mean, variance := make([]float32, n), make([]float32, n)
	clip := calib.Clip{Sigmas: p.recipe.ClipSigma, Floor: 0.5}
	columns := p.camera.Columns
	err = parallel.Do(ctx, p.workers, y1-y0, func(_, row int) error {
		clip := clip
		if how.noise > 0 && len(frames) < fewestScattered {
			level, _ := calib.RobustLevel(samples[0][row*columns:(row+1)*columns], make([]float32, columns))
			clip.Noise = math.Sqrt(how.noise*how.noise + (1+p.camera.PhotonExcess)*max(0, level))
		}
		part := make([][]float32, len(samples))
		for i := range samples {
			part[i] = samples[i][row*columns : (row+1)*columns]
		}
		clip.Stack(mean[row*columns:(row+1)*columns], variance[row*columns:(row+1)*columns], part)
		return nil
	})
	for _, b := range blank {
		for i, f := range b {
			if at := i + (y0-badY0)*columns; at >= 0 && at < len(bad) {
				bad[at] |= f & calib.BadPixel
			}
		}
	}
	return mean, err
}

// combine turns means into rates, and says how uncertain is what they take off
// a science frame. With B the bias, d and o the means of dark and all-off frames
// exposed for td and to, and t the science exposure,
//
//	taken = B + (t/to) (o - B)      with all-off frames: their dark current is in o
//	taken = B + (t/td) (d - B)      without
//
// so that its variance is (1-t/to)^2 var(B) + (t/to)^2 var(o), and so on. The
// variances are those of the noise model: a few frames' scatter says less.
func (p *prepare) combine(s *masterStrip, y0 int, bias, dark, off, lampOff []float32) {
	f := p.frames
	for i := range s.bad {
		quiet := p.camera.Variance[y0+i/p.camera.Columns][i%p.camera.Columns]
		var biasE, darkRate, biasVariance float64
		if bias != nil {
			biasE, biasVariance = float64(bias[i]), quiet/float64(len(f.bias))
		}
		taken := biasVariance
		if dark != nil {
			charge := float64(dark[i]) - biasE
			darkRate = charge / f.darkSeconds
			taken = meanVariance(p.camera, quiet, charge, len(f.dark), f.scienceSeconds/f.darkSeconds, biasVariance)
		}
		if off != nil {
			charge := float64(off[i]) - biasE
			s.images[masterOff][i] = float32(charge/f.offSeconds - darkRate)
			taken = meanVariance(p.camera, quiet, charge, len(f.off), f.scienceSeconds/f.offSeconds, biasVariance)
		}
		if lampOff != nil {
			s.images[masterLampOff][i] = float32((float64(lampOff[i])-biasE)/f.lamps.seconds - darkRate)
		}
		s.images[masterBias][i], s.images[masterDark][i] = float32(biasE), float32(darkRate)
		s.images[masterVariance][i] = float32(taken)
	}
}

// meanVariance takes the charge as it is, below 0 as well: clipped, noise alone would
// look like light.
func meanVariance(c *exposure.Camera, quiet, charge float64, frames int, ratio, biasVariance float64) float64 {
	own := max(quiet+(1+c.PhotonExcess)*charge, quiet*varianceFloor)
	return ratio*ratio*own/float64(frames) + (1-ratio)*(1-ratio)*biasVariance
}

// findHot marks pixels whose dark charge in a science exposure stands out of
// its row by more than the noise it would be judged against: a smaller excess
// is taken off with the dark and does no harm.
func (p *prepare) findHot(ctx context.Context, s *masterStrip, known bool) error {
	if !known {
		return nil
	}
	charge := make([]float32, len(s.bad))
	for i, rate := range s.images[masterDark] {
		charge[i] = rate * float32(p.frames.scienceSeconds)
	}
	const readNoises = 10 // the excess, in read variances: as much noise again and more
	rule := calib.DefaultHotRule(readNoises * p.camera.NoisiestVariance())
	rule.Sigmas = p.recipe.HotSigma
	// Each row is judged by itself.
	columns := p.camera.Columns
	return parallel.Do(ctx, p.workers, len(s.bad)/columns, func(_, row int) error {
		from, to := row*columns, (row+1)*columns
		_, err := rule.Flag(s.bad[from:to], charge[from:to], columns)
		return err
	})
}

// levelAbove is the light in electrons that is 30 times its own noise on top of a
// variance without light, L/sqrt(L + variance) = 30: a fair response is then told
// from none beyond doubt.
func levelAbove(variance float64) float64 {
	const noises = 30
	return noises*noises/2 + noises*math.Sqrt(noises*noises/4+variance)
}

// findDead marks pixels that do not answer the lamp, in the strip's rows from y0 on; the rows
// around them, first..last-1, serve as neighbours. bias is theirs.
func (p *prepare) findDead(ctx context.Context, s *masterStrip, y0, first, last int, bias []float32) error {
	if len(p.frames.lamps.on) == 0 {
		return nil
	}
	lamp, err := p.stack(ctx, p.frames.lamps.on, first, last, s.bad, y0)
	if err != nil {
		return err
	}
	if bias != nil {
		calib.Subtract(lamp, bias, 1)
	}
	rule := calib.DefaultDeadRule(levelAbove(p.camera.NoisiestVariance()))
	rule.Fraction = p.recipe.DeadBelow
	flags := make([]calib.Flag, len(lamp))
	if _, err := rule.Flag(flags, lamp, p.camera.Columns); err != nil {
		return err
	}
	inner := flags[(y0-first)*p.camera.Columns:][:len(s.bad)]
	for i, f := range inner {
		s.bad[i] |= f
	}
	return nil
}

// masters reads the scratch file.
type masters struct {
	file   *fitsutil.File
	images [masterCount]*fitsutil.Image
}

func openMasters(dir string) (*masters, error) {
	path := filepath.Join(dir, mastersFile)
	file, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	m := &masters{file: file}
	for i := range m.images {
		if m.images[i], err = file.Image(i + 1); err != nil {
			return nil, fmt.Errorf("scratch file: %w", err)
		}
	}
	return m, nil
}
