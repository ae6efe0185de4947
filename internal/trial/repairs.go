package trial

import (
	"context"
	"fmt"
	"math"
	"os"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// CorrectingRecipe is the recipe of the field's nights with throughput and repair used
// as said, auto or off.
func (n *Night) CorrectingRecipe(throughput, repair string) (*reduce.Recipe, error) {
	r, err := reduce.LoadRecipe(n.recipe())
	if err != nil {
		return nil, err
	}
	r.Throughput.Use, r.Repair.Use = throughput, repair
	return r, nil
}

// RehearseFaults draws a night with faults, each as NAME=SIZE.
func (n *Night) RehearseFaults(ctx context.Context, name string, opts rehearse.Options, faults ...string) error {
	for _, text := range faults {
		f, err := rehearse.ParseFault(text)
		if err != nil {
			return err
		}
		opts.Faults = append(opts.Faults, f)
	}
	return n.Rehearse(ctx, name, opts)
}

// Correct reduces the night named name again, with throughput and repair used as said.
func (n *Night) Correct(ctx context.Context, name, throughput, repair string) (*reduce.Result, error) {
	recipe, err := n.CorrectingRecipe(throughput, repair)
	if err != nil {
		return nil, err
	}
	if err := os.RemoveAll(n.Run(name)); err != nil {
		return nil, err
	}
	return n.Reduce(ctx, name, reduce.Options{Cube: true, Recipe: recipe})
}

// RestoredFindings make a night with so many science frames lost and judge it: what
// restoration makes of the cube, against truth and against a night that lost nothing.
// A night whose rows leave dependent marks must be refused instead.
func (f *Field) RestoredFindings(ctx context.Context, name, dir string, seed uint64, lost int) ([]Finding, error) {
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	if err := n.RehearseFaults(ctx, Noisy, rehearse.Options{Seed: seed}, fmt.Sprintf("lost=%d", lost)); err != nil {
		return nil, err
	}
	result, err := n.Correct(ctx, Noisy, "off", "auto")
	if err != nil {
		return nil, err
	}
	if _, err := n.Make(ctx, Twin, rehearse.Options{Seed: seed, Noiseless: true, NoTruth: true}); err != nil {
		return nil, err
	}
	pulls, cube, err := n.PullsOf(1)
	growth := result.Run.Quality.RestoredGrowth
	if growth == nil { // refused: nothing is good, so that there are no pulls
		exit := 0.0
		if result.Run.Exit == reduce.ExitDegraded {
			exit = 1
		}
		return []Finding{AtLeast(name+": cannot be restored, which run.json says with exit 3", exit, 1, 1)}, nil
	}
	if err != nil {
		return nil, err
	}
	restored := 0
	for _, flags := range cube.Flags {
		if flags&(product.FlagRestored|product.FlagNoData) != 0 {
			restored++
		}
	}
	list := []Finding{
		Stated(name+": growth of the noise", *growth, 1),
		AtLeast(name+": voxels flagged RESTORED or NODATA", float64(restored)/float64(len(cube.Flags)), 1, len(cube.Flags)),
	}
	return append(list, clean.judge(name+", all good voxels", &pulls.All)...), nil
}

// Brighten makes the field's stars brighter by so many magnitudes.
func (f *Field) Brighten(mags float64) {
	for i := range f.Scene.Sources {
		if m := f.Scene.Sources[i].ABMag; m != nil {
			brighter := *m - mags
			f.Scene.Sources[i].ABMag = &brighter
		}
	}
}

// ErrorScaleFindings make a night whose stars are brighter by so many magnitudes, with
// faults or clean, and judge its pulls with the error scale; stated is what they are
// without.
func (f *Field) ErrorScaleFindings(ctx context.Context, name, dir string, seed uint64, brighter float64, faults ...string) ([]Finding, error) {
	f.Brighten(brighter)
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	if err := n.RehearseFaults(ctx, Noisy, rehearse.Options{Seed: seed}, faults...); err != nil {
		return nil, err
	}
	if _, err := n.Make(ctx, Twin, rehearse.Options{Seed: seed, Noiseless: true, NoTruth: true}); err != nil {
		return nil, err
	}
	var list []Finding
	for _, repair := range []string{"off", "auto"} {
		if _, err := n.Correct(ctx, Noisy, "off", repair); err != nil {
			return nil, err
		}
		pulls, _, err := n.PullsOf(1)
		if err != nil {
			return nil, err
		}
		bright := &pulls.ByCounts[9]
		switch {
		case repair == "off":
			list = append(list, Stated(name+": brightest decile, pulls without error scale", bright.Std(), bright.N))
		case len(faults) == 1:
			// One alone may leave little scatter to see beside what it does to the mean
			// image, a broader star, which no scatter tells.
			list = append(list, Stated(name+": brightest decile, pulls with error scale", bright.Std(), bright.N))
		case len(faults) == 0:
			list = append(list, pulls.Findings(name+", with error scale")...)
		default:
			list = append(list,
				Near(name+": brightest decile, pulls with error scale", bright.Std(), 1, 0.3, 0, bright.N),
				Stated(name+": all good voxels, pulls with error scale", pulls.All.Std(), pulls.All.N))
		}
	}
	return list, nil
}

// LeakFindings make nights without noise whose throughput drifts by 5 %, one of whose
// off mirrors leak 1/500 of the light, a star outside the field being 4000 times as
// bright as one inside: of the order of 1000 elements' light. The sky is bright, so that
// its lines tell the throughput. What is left of the leak is by how much it shifts the
// constant of a line through cube against truth, in units of the field's mean; the slope
// loses what off mirrors send of each element's own light, and is the lamp flat's to find.
func (f *Field) LeakFindings(ctx context.Context, name, dir string, seeds []uint64, allOff bool) ([]Finding, error) {
	f.leakScene()
	// The estimators take off what noise adds to squares of readings, which these nights
	// lack: the throughput's error that this makes leaves -1.0e-4 (square field) and
	// -0.55e-4 (diagonal) of the leak at the fields' own exposure, and falls with the
	// square of the light. With the true throughput the factor of the all-off frames is
	// right to 1e-4 of itself, which is 1e-7 of the field.
	f.Target.AllOffEvery = 2
	f.Target.DwellSeconds *= 4
	if !allOff {
		f.Target.AllOffEvery = 0
	}
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	var left, own, slopes Moments
	var count int
	var by product.ResidualLight
	for _, seed := range seeds {
		var residual, slope [2]float64
		for i, faults := range [][]string{{"drift=0.05"}, {"drift=0.05", "leak=0.002"}} {
			night := []string{Twin, Noisy}[i]
			if err := n.Discard(night); err != nil {
				return nil, err
			}
			if err := n.RehearseFaults(ctx, night, rehearse.Options{Seed: seed, Noiseless: true}, faults...); err != nil {
				return nil, err
			}
			result, err := n.Correct(ctx, night, "auto", "auto")
			if err != nil {
				return nil, err
			}
			by = result.Run.Quality.ResidualLight
			cube, err := ReadCube(n.CubePath(night))
			if err != nil {
				return nil, err
			}
			truth, err := cube.ReadTruth(n.TruthPath(night))
			if err != nil {
				return nil, err
			}
			var constant, mean float64
			slope[i], constant, mean, count = linesThrough(cube, truth)
			residual[i] = constant / mean
		}
		left.Add(residual[1] - residual[0])
		own.Add(residual[0])
		slopes.Add(slope[1] / slope[0])
	}
	what := fmt.Sprintf("%s, light taken off by %s", name, by)
	list := []Finding{
		Stated(what+": slope of cube against truth, over that without leak", slopes.Mean(), count),
		Stated(what+": what the throughput's own error leaves, in the field's mean, scatter over the nights", own.Std(), len(seeds)),
		Stated(what+": left of the leak, scatter over the nights", left.Std(), len(seeds)),
	}
	const mean = ": left of the leak, in the field's mean, mean of the nights"
	if allOff {
		return append(list, Near(what+mean, left.Mean(), 0, 1e-4, left.Std()/math.Sqrt(float64(len(seeds))), len(seeds))), nil
	}
	return append(list, Stated(what+mean, left.Mean(), len(seeds))), nil
}

// leakScene brightens the sky, widens the device and puts a star beyond the field.
func (f *Field) leakScene() {
	const mirrors, skyMags, starMags = 60, 2.9, 9
	f.Profile.DMD.Columns += mirrors
	sky := *f.Scene.Sky.ContinuumABArcsec2 - skyMags
	f.Scene.Sky.ContinuumABArcsec2 = &sky
	for i := range f.Scene.Sky.Lines {
		f.Scene.Sky.Lines[i].FluxWM2Arcsec2 *= 50
	}
	u, w := f.HalfArcsec()
	star := f.Scene.Sources[0]
	star.EastArcsec, star.NorthArcsec = f.SkyOf(1.3*u, 0.2*w)
	magnitude := *star.ABMag - starMags
	star.ABMag = &magnitude
	f.Scene.Sources = append(f.Scene.Sources, star)
}

// linesThrough fits cube = slope truth + constant to the good voxels of each element, since
// what a mirror leaks when it is off is missing from what opening it adds, and leaks have
// structure over the elements. It gives the means over the elements, the mean of truth and
// the number of voxels.
func linesThrough(c *Cube, truth []float32) (slope, constant, mean float64, n int) {
	elements := c.N
	used := 0.0
	for j := range elements {
		var x, y, xx, xy, m float64
		for i := j; i < len(truth); i += elements {
			if t := truth[i]; c.Good(i) && t == t {
				a, b := float64(t), float64(c.Signal[i])
				x, y, xx, xy, m = x+a, y+b, xx+a*a, xy+a*b, m+1
			}
		}
		if m < 2 || xx*m <= x*x {
			continue
		}
		own := (xy - x*y/m) / (xx - x*x/m)
		slope, constant, mean = slope+own, constant+(y-own*x)/m, mean+x/m
		n += int(m)
		used++
	}
	return slope / used, constant / used, mean / used, n
}

// AllFaultsFindings make a night of the field with everything the dark columns are there
// for, and reduce it with more and more of the corrections; the last, the default, is
// judged.
func (f *Field) AllFaultsFindings(ctx context.Context, name, dir string, seed uint64, faults ...string) ([]Finding, error) {
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	if err := n.RehearseFaults(ctx, Noisy, rehearse.Options{Seed: seed}, faults...); err != nil {
		return nil, err
	}
	var list []Finding
	for _, c := range []struct{ what, throughput, repair string }{
		{"throughput alone", "auto", "off"}, {"audit, restoration, error scale alone", "off", "auto"}, {"all, the default", "auto", "auto"},
	} {
		result, err := n.Correct(ctx, Noisy, c.throughput, c.repair)
		if err != nil {
			return nil, err
		}
		what := name + ", " + c.what
		cube, err := ReadCube(n.CubePath(Noisy))
		if err != nil {
			return nil, err
		}
		truth, err := cube.ReadTruth(n.TruthPath(Noisy))
		if err != nil {
			return nil, err
		}
		// LOST says that nothing is to be trusted: looked at all the same.
		if c.repair == "off" {
			for i := range cube.Flags {
				cube.Flags[i] &^= product.FlagLost
			}
		}
		pulls, err := NewPulls(cube, truth, cube.Variance, 1)
		if err != nil {
			return nil, err
		}
		rms := cube.rmsError(truth)
		list = append(list, Stated(what+": rms of cube - truth", rms, pulls.All.N), Stated(what+": exit", float64(result.Run.Exit), 1))
		if c.throughput == "auto" && c.repair == "auto" {
			list = append(list, Near(what+": pulls", pulls.All.Std(), 1, 0.07, 0, pulls.All.N))
			continue
		}
		list = append(list, Stated(what+": pulls", pulls.All.Std(), pulls.All.N))
	}
	return list, nil
}

// rmsError is the rms of cube - truth over the good voxels.
func (c *Cube) rmsError(truth []float32) float64 {
	var m Moments
	for i, t := range truth {
		if c.Good(i) && t == t {
			m.Add(float64(c.Signal[i] - t))
		}
	}
	return math.Hypot(m.Mean(), m.Std())
}
