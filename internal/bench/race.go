package main

import (
	"cmp"
	"context"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"mirrorloom/internal/child"
)

// race is mirrorloom beside a script that makes the same product.
type race struct {
	what, night string
	edits       []edit
	script      string
	// product is mirrorloom's file; recipe, a built-in one or recipe.yaml, asks for
	// the script's steps.
	products, product, recipe string
	// compare judges how well the products agree.
	compare func(ours, theirs string) (string, error)
	// leastSpeed and leastMemory are the ratios to reach (section 11 of the design).
	leastSpeed, leastMemory float64
}

// outcome is what was measured of a race, a usage a run.
type outcome struct {
	race
	ours, theirs []child.Usage
	agreement    string
}

// memory is what mirrorloom is given: an eighth of what the scripts take and
// less.
const memory = "256MiB"

// plainMean is the recipe "nominal", which takes the profile's wavelengths and
// even pixels, as the scripts do, with a plain mean for the master bias.
const plainMean = "detector: {use: auto, clip_sigma: 100}\nflat: {use: off}\narc: {use: off}\n"

func races() []race {
	return []race{
		{
			what: "`reduce --products elements`, bias only", night: "255 frames of 1024 x 1024, 9 bias frames",
			edits: biasOnly, script: "numpy_elements.py", products: "elements", product: "elements.fits", recipe: "recipe.yaml",
			compare: sameElements, leastSpeed: 2, leastMemory: 8,
		},
		{
			what: "`reduce` without flat and arc", night: "255 frames of 1024 x 1024 with overscan, 9 bias, 3 dark, 5 all-off, 1 lamp frame",
			script: "numpy_reduce.py", products: "cube", product: "cube.fits", recipe: "nominal",
			compare: sameCube, leastSpeed: 5, leastMemory: 8,
		},
	}
}

func raceAll(ctx context.Context, scratch string, runs int) ([]outcome, error) {
	var all []outcome
	for i, r := range races() {
		dir := filepath.Join(scratch, fmt.Sprint(i))
		fmt.Fprintf(os.Stderr, "%s: making the night ...\n", r.what)
		n, err := makeNight(ctx, dir, r.edits)
		if err != nil {
			return nil, err
		}
		o, err := r.run(ctx, dir, n, runs)
		if err != nil {
			return nil, err
		}
		all = append(all, o)
		if err := os.RemoveAll(dir); err != nil {
			return nil, err
		}
	}
	return all, nil
}

// run lets both sides run in turn.
func (r race) run(ctx context.Context, dir string, n night, runs int) (outcome, error) {
	o := outcome{race: r}
	run, theirs, recipe := filepath.Join(dir, "run"), filepath.Join(dir, "script.fits"), filepath.Join(dir, "recipe.yaml")
	if err := os.WriteFile(recipe, []byte(plainMean), 0o644); err != nil {
		return o, err
	}
	if r.recipe != filepath.Base(recipe) {
		recipe = r.recipe
	}
	args := []string{"reduce", n.frames, "--sequence", n.sequence, "--recipe", recipe, "--products", r.products, "--memory", memory, "-o", run, "--replace"}
	for i := range runs {
		fmt.Fprintf(os.Stderr, "%s: run %d of %d ...\n", r.what, i+1, runs)
		ours, err := child.Run(ctx, program, args...)
		if err != nil {
			return o, err
		}
		script, err := child.Run(ctx, python, filepath.Join(given, r.script), n.frames, n.sequence, theirs)
		if err != nil {
			return o, err
		}
		o.ours, o.theirs = append(o.ours, ours), append(o.theirs, script)
	}
	var err error
	o.agreement, err = r.compare(filepath.Join(run, r.product), theirs)
	return o, err
}

// median of a figure over the runs.
func median[T cmp.Ordered](list []child.Usage, of func(child.Usage) T) T {
	var all []T
	for _, u := range list {
		all = append(all, of(u))
	}
	slices.Sort(all)
	return all[len(all)/2]
}

func wall(u child.Usage) time.Duration { return u.Wall }
func busy(u child.Usage) time.Duration { return u.CPU }
func peak(u child.Usage) int64         { return u.PeakBytes }

// ratio is theirs over ours with its range over the runs.
func ratio[T time.Duration | int64](o outcome, of func(child.Usage) T) string {
	var each []float64
	for i := range o.ours {
		each = append(each, float64(of(o.theirs[i]))/float64(of(o.ours[i])))
	}
	return fmt.Sprintf("%.1f (%.1f to %.1f)", float64(median(o.theirs, of))/float64(median(o.ours, of)), slices.Min(each), slices.Max(each))
}

func writeRaces(b *strings.Builder, all []outcome, runs int) {
	fmt.Fprintf(b, `## Beside numpy

The scripts in testdata/bench are what an observer would write with numpy, scipy and astropy: the whole night in memory,
each step in its plainest array form. %d runs of each side in turn, products synced to the disk on both; mirrorloom with
`+"`--memory %s`"+`. Ratios are the script's figure over mirrorloom's (range over the runs).

| what | wall time | to reach | processor time | peak memory | to reach |
| --- | --- | --- | --- | --- | --- |
`, runs, memory)
	for _, o := range all {
		fmt.Fprintf(b, "| %s | %s | >= %g | %s | %s | >= %g |\n", o.what, ratio(o, wall), o.leastSpeed, ratio(o, busy), ratio(o, peak), o.leastMemory)
	}
	b.WriteString("\n| what | mirrorloom | script | night | agreement of the products |\n| --- | --- | --- | --- | --- |\n")
	for _, o := range all {
		fmt.Fprintf(b, "| %s | %s | %s | %s | %s |\n", o.what, figures(o.ours), figures(o.theirs), o.night, o.agreement)
	}
	b.WriteString("\n")
}

func figures(list []child.Usage) string {
	return fmt.Sprintf("%.1f s, processor %.1f s, %d MiB", median(list, wall).Seconds(), median(list, busy).Seconds(), median(list, peak)>>20)
}
