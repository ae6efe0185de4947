package skyflux

import (
	"context"
	"fmt"
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
)

// Options of all passes.
type Options struct {
	// MemoryBytes bounds the memory of the passes.
	MemoryBytes int64
	Workers     int
	// Progress, which may be nil, is called as passes get on.
	Progress func(pass string, done, total int)
}

func (o *Options) setDefaults() {
	o.Workers = max(1, o.Workers)
	if o.Progress == nil {
		o.Progress = func(string, int, int) {}
	}
}

// workers is how many planes fit the memory beside held bytes a place.
func (o Options) workers(s *Source, held int64) int {
	room := o.MemoryBytes - held*int64(s.places())
	return int(max(1, min(int64(o.Workers), room/(planeBytes*int64(s.places())+1))))
}

// Names are the elements and rows that the recipe names for blank sky, from the first to
// the last, counted from 0; empty to choose. With both, places that are in both.
type Names struct{ Elements, Rows [][2]int }

func (n Names) empty() bool { return len(n.Elements) == 0 && len(n.Rows) == 0 }

func (n Names) hold(element, row int) bool {
	in := func(ranges [][2]int, x int) bool {
		return len(ranges) == 0 || slices.ContainsFunc(ranges, func(r [2]int) bool { return x >= r[0] && x <= r[1] })
	}
	return in(n.Elements, element) && in(n.Rows, row)
}

// Sky is the light of the blank sky.
type Sky struct {
	Record product.SkyRecord
	Report product.SkyReport
	// Blank are the places it was measured at, [row][element]. Part is what each place sees
	// of the sky, less than 1 at the slit's ends.
	Blank    []bool
	Part     []float32
	spectrum *calib.SkySpectrum
}

// leastPlaces of named sky; fewer have no mean to speak of.
const leastPlaces = 8

// MeasureSky chooses the blank places and measures their light. correlated is by how much
// neighbouring rows share pixels (calib.Correlation's alongSlit), 1 where not known; part
// is what each place sees of the sky, [row][element]. An error says that the sky cannot be
// found, and the cure.
func (s *Source) MeasureSky(ctx context.Context, names Names, part []float32, correlated float64, o Options) (*Sky, error) {
	o.setDefaults()
	if need := (lookBytes + planeBytes) * int64(s.places()); need > o.MemoryBytes {
		return nil, fmt.Errorf("sky: %d elements and %d rows need %d MiB of memory; give --memory %d MiB more", s.Elements, s.Rows, need>>20+1, (need-o.MemoryBytes)>>20+1)
	}
	rule := calib.DefaultSkyRule()
	seen, err := s.lookAt(ctx, rule, part, func(done, total int) { o.Progress("look", done, total) })
	if err != nil {
		return nil, err
	}
	sky := &Sky{Part: part, Report: product.SkyReport{Chosen: "blindly"}}
	usable := 0
	for _, v := range seen.variance {
		if v > 0 {
			usable++
		}
	}
	if names.empty() {
		choice, err := rule.Choose(seen.picture, seen.variance, s.Elements, seen.peaks)
		if err != nil {
			return nil, err
		}
		sky.Blank, sky.Report.Places, sky.Report.Noise = choice.Blank, choice.Count, choice.Scale
	} else if err := sky.name(names, seen, s.Elements); err != nil {
		return nil, err
	}
	sky.Report.Share = float64(sky.Report.Places) / float64(max(1, usable))
	sum := calib.NewSkySum(sky.Blank, seen.variance, s.Elements, s.Voxels)
	if err := s.each(ctx, "sky", o, 9, func(p *plane, l int) error {
		sum.AddPlane(l, p.signal, p.variance, p.flags, product.FlagBad)
		return nil
	}); err != nil {
		return nil, err
	}
	if sky.spectrum, err = sum.Spectrum(correlated, calib.DefaultSkyLineRule()); err != nil {
		return nil, err
	}
	sky.record()
	return sky, nil
}

// name takes the named places that are usable.
func (k *Sky) name(names Names, seen *look, elements int) error {
	k.Report.Chosen = "by name"
	k.Blank = make([]bool, len(seen.variance))
	for i, v := range seen.variance {
		if v > 0 && names.hold(i%elements, i/elements) {
			k.Blank[i] = true
			k.Report.Places++
		}
	}
	if k.Report.Places < leastPlaces {
		return fmt.Errorf("sky: the named elements and rows hold %d places that are good in half of the band, %d are the least; name others", k.Report.Places, leastPlaces)
	}
	return nil
}

// record fills in what is written.
func (k *Sky) record() {
	c := k.spectrum
	k.Record = product.SkyRecord{Value: c.Value, Variance: c.Variance, Weight: c.TotalWeight, Line: c.Line, Places: make([]int32, len(c.Places))}
	var quiet, lines, errors []float64
	for l, n := range c.Places {
		k.Record.Places[l] = int32(n)
		switch {
		case math.IsNaN(c.Value[l]):
			continue
		case c.Line[l]:
			lines = append(lines, c.Chi2[l])
		default:
			quiet = append(quiet, c.Chi2[l])
		}
		errors = append(errors, math.Sqrt(c.Variance[l])/math.Abs(c.Value[l]))
	}
	k.Report.Lines = len(lines)
	k.Report.Chi2, k.Report.Chi2Lines, k.Report.RelError = mean(quiet), mean(lines), median(errors)
	k.Report.Correlated, k.Report.CorrelatedLines = c.Correlated, c.CorrelatedLines
}

// Share is the image SKYSHARE, [plane][row][element]: weights, and Part.
func (k *Sky) Share() []float32 {
	out := make([]float32, len(k.spectrum.Weight), 2*len(k.spectrum.Weight))
	for i, w := range k.spectrum.Weight {
		out[i] = float32(w)
	}
	return append(out, k.Part...)
}

// each reads every plane once, several at a time; held is the memory in use for each place.
func (s *Source) each(ctx context.Context, pass string, o Options, held int64, work func(p *plane, l int) error) error {
	workers := o.workers(s, held)
	planes := make([]*plane, workers)
	for i := range planes {
		planes[i] = s.newPlane()
	}
	done := counter{total: s.Voxels, tell: func(done, total int) { o.Progress(pass, done, total) }}
	return parallel.Do(ctx, workers, s.Voxels, func(worker, l int) error {
		if err := s.read(planes[worker], l); err != nil {
			return err
		}
		if err := work(planes[worker], l); err != nil {
			return err
		}
		done.add()
		return nil
	})
}

func mean(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v
	}
	return sum / float64(max(1, len(x)))
}

// median is 0 without values.
func median(x []float64) float64 {
	if len(x) == 0 {
		return 0
	}
	slices.Sort(x)
	return x[len(x)/2]
}
