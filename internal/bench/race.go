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
	what, frames string
	night        nightPlan
	script       string
	// product is mirrorloom's file; recipe, a built-in one or the text of one, asks for
	// the script's steps.
	products, product, recipe string
	// memory that mirrorloom is given.
	memory string
	// scriptMemory is all that the script may have, in bytes of addresses; 0 for no bound.
	scriptMemory int64
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
	// failed is what the script said when its memory was too little; empty if it was not.
	failed string
}

// plainMean is the recipe "nominal", which takes the profile's wavelengths and even
// pixels, as the scripts do, with a plain mean for the master bias.
const plainMean = `detector: {use: auto, clip_sigma: 100}
flat: {use: off}
arc: {use: off}
throughput: {use: off}
repair: {use: off}
`

// run lets both sides run in turn.
func (r race) run(ctx context.Context, s *session) (outcome, error) {
	o := outcome{race: r}
	n, err := s.nights.make(ctx, r.night)
	if err != nil {
		return o, err
	}
	run, theirs := filepath.Join(s.dir, "run"), filepath.Join(s.dir, "script.fits")
	recipe, err := recipeFile(s.dir, r.recipe)
	if err != nil {
		return o, err
	}
	args := []string{"reduce", n.frames, "--sequence", n.sequence, "--recipe", recipe, "--products", r.products, "--memory", r.memory, "-o", run, "--replace"}
	for i := range s.runs {
		fmt.Fprintf(os.Stderr, "%s: run %d of %d ...\n", r.what, i+1, s.runs)
		ours, err := child.Run(ctx, program, args...)
		if err != nil {
			return o, err
		}
		o.ours = append(o.ours, ours)
		script, err := r.runScript(ctx, n, theirs)
		if outOfMemory(err) && r.scriptMemory > 0 {
			o.failed = lastLine(err)
			return o, s.nights.discard(n)
		}
		if err != nil {
			return o, err
		}
		o.theirs = append(o.theirs, script)
	}
	if o.agreement, err = r.compare(filepath.Join(run, r.product), theirs); err != nil {
		return o, err
	}
	return o, s.nights.discard(n)
}

// recipeFile gives what --recipe takes: a built-in one's name, or a file of the text.
func recipeFile(dir, recipe string) (string, error) {
	if !strings.Contains(recipe, "\n") {
		return recipe, nil
	}
	path := filepath.Join(dir, "recipe.yaml")
	return path, os.WriteFile(path, []byte(recipe), 0o644)
}

func (r race) runScript(ctx context.Context, n night, out string) (child.Usage, error) {
	args := []string{filepath.Join(given, r.script), n.frames, n.sequence, out}
	if r.scriptMemory == 0 {
		return child.Run(ctx, python, args...)
	}
	const limited = `ulimit -v "$1"; shift; exec "$@"` // in KiB
	return child.Run(ctx, "/bin/sh", append([]string{"-c", limited, "sh", fmt.Sprint(r.scriptMemory >> 10), python}, args...)...)
}

// outOfMemory tells that numpy, or Python, could not have the memory it asked for.
func outOfMemory(err error) bool {
	return err != nil && strings.Contains(err.Error(), "MemoryError")
}

func lastLine(err error) string {
	lines := strings.Split(strings.TrimSpace(err.Error()), "\n")
	return lines[len(lines)-1]
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

// over is the ratio of the medians of a figure of b and a.
func over[T time.Duration | int64](b, a []child.Usage, of func(child.Usage) T) float64 {
	return float64(median(b, of)) / float64(median(a, of))
}

// ratio is b's figure over a's with its range over the runs.
func ratio[T time.Duration | int64](b, a []child.Usage, of func(child.Usage) T) string {
	var each []float64
	for i := range a {
		each = append(each, float64(of(b[i]))/float64(of(a[i])))
	}
	return fmt.Sprintf("%.2f (%.2f to %.2f)", over(b, a, of), slices.Min(each), slices.Max(each))
}

func figures(list []child.Usage) string {
	return fmt.Sprintf("%.1f s, processor %.1f s, %d MiB", median(list, wall).Seconds(), median(list, busy).Seconds(), median(list, peak)>>20)
}

// verdict compares with what is to be reached.
func (o *outcome) verdict() string {
	return judged(over(o.theirs, o.ours, wall) >= o.leastSpeed && over(o.theirs, o.ours, peak) >= o.leastMemory)
}

// raceTable lists races that both sides ended.
func raceTable(b *strings.Builder, all []outcome) {
	b.WriteString(`| what | wall time | to reach | processor time | peak memory | to reach | verdict |
| --- | --- | --- | --- | --- | --- | --- |
`)
	for i := range all {
		o := &all[i]
		fmt.Fprintf(b, "| %s | %s | >= %g | %s | %s | >= %g | %s |\n", o.what, ratio(o.theirs, o.ours, wall), o.leastSpeed,
			ratio(o.theirs, o.ours, busy), ratio(o.theirs, o.ours, peak), o.leastMemory, o.verdict())
	}
	b.WriteString("\n| what | mirrorloom | script | night | agreement of the products |\n| --- | --- | --- | --- | --- |\n")
	for _, o := range all {
		fmt.Fprintf(b, "| %s | %s, `--memory %s` | %s | %s | %s |\n", o.what, figures(o.ours), o.memory, figures(o.theirs), o.frames, o.agreement)
	}
}

// besideNumpy are the races of the plainest reductions.
func besideNumpy(ctx context.Context, s *session) (string, error) {
	races := []race{
		{
			what: "`reduce --products elements`, bias only", frames: "255 frames of 1024 x 1024, 9 bias frames",
			night:  nightPlan{"bias-only", biasOnly(), perfect},
			script: "numpy_elements.py", products: "elements", product: "elements.fits", recipe: plainMean, memory: "256MiB",
			compare: sameElements, leastSpeed: 2, leastMemory: 8,
		},
		{
			what: "`reduce` without flat and arc", frames: "255 frames of 1024 x 1024 with overscan, 9 bias, 3 dark, 5 all-off, 1 lamp frame",
			night:  simple,
			script: "numpy_reduce.py", products: "cube", product: "cube.fits", recipe: "nominal", memory: "256MiB",
			compare: sameCube(0.15, "another interpolant"), leastSpeed: 5, leastMemory: 8,
		},
	}
	var all []outcome
	for _, r := range races {
		o, err := r.run(ctx, s)
		if err != nil {
			return "", err
		}
		all = append(all, o)
	}
	var b strings.Builder
	fmt.Fprintf(&b, `The scripts in testdata/bench are what an observer would write with numpy, scipy and astropy: the whole night in memory,
each step in its plainest array form. %d runs of each side in turn, products synced to the disk on both. Ratios are the
script's figure over mirrorloom's (range over the runs).

`, s.runs)
	raceTable(&b, all)
	return b.String(), nil
}

// simple is a night without coded lamp frames and arcs, as its profile says.
var simple = nightPlan{name: "simple", options: perfect}

// calibrated is a night with all lamp frames and an instrument that is not quite as its
// profile says. faults are options of rehearse.
func calibrated(name string, faults ...string) nightPlan {
	return nightPlan{name, []edit{allLamps(8), coded(255, 2)}, append([]string{"--no-truth"}, faults...)}
}

// someFaults are clouds of 2 % and cosmic rays.
var someFaults = []string{"--fault", "drift=0.02", "--fault", "cosmic=0.5"}

// everything is the race of the default recipe at 255 frames.
func everything() race {
	return race{
		what:   "`reduce`",
		frames: "255 science and 255 coded lamp frames of 1024 x 1024, 12 more of the lamp, 29 arcs, 9 bias, 3 dark, 5 all-off; throughput varies by 2 %, cosmic rays",
		night:  calibrated("all-steps", someFaults...),
		script: "numpy_full.py", products: "cube", product: "cube.fits", recipe: "default", memory: "256MiB",
		compare: sameCube(0.3, "another interpolant, other fits"), leastSpeed: 5, leastMemory: 8,
	}
}

// allSteps is the race of the default recipe.
func allSteps(ctx context.Context, s *session) (string, error) {
	o, err := everything().run(ctx, s)
	if err != nil {
		return "", err
	}
	var b strings.Builder
	fmt.Fprintf(&b, `The default recipe: wavelengths from arcs, trace, responses of pixels, slit and light path from a coded cycle of lamp
frames, neighbour term, leak, throughput by the dark columns with hold-out, cosmic rays by matching pursuit, error scale.
testdata/bench/numpy_full.py does the same with numpy, but for what mirrorloom alone measures (persistence, the flat's
depth, terms of colour, pairings other than common mix-ups). %d runs of each side in turn, products synced on both.

`, s.runs)
	raceTable(&b, []outcome{o})
	return b.String(), nil
}

// laptop is the memory of a usual laptop.
const laptop = 16 << 30

func longPlan() nightPlan {
	return nightPlan{"long", append(narrowMirrors(), allLamps(32), coded(1023, 1)), append([]string{"--no-truth"}, someFaults...)}
}

// longNight is the race of the default recipe at four times the frames.
func longNight(ctx context.Context, s *session) (string, error) {
	r := everything()
	r.frames = "1023 science and 1023 coded lamp frames of 1024 x 1024, and calibrations as above"
	r.night = longPlan()
	r.memory, r.scriptMemory = "512MiB", laptop
	once := *s
	once.runs = 1
	o, err := r.run(ctx, &once)
	if err != nil {
		return "", err
	}
	var b strings.Builder
	fmt.Fprintf(&b, "The same steps for 1023 frames, mirrors of half the width: %s. The script may have %d GiB, as on a usual\nlaptop (`ulimit -v`). One run of each side.\n\n", r.frames, laptop>>30)
	if o.failed == "" {
		b.WriteString("The ratio is to be above that of 255 frames.\n\n")
		raceTable(&b, []outcome{o})
		return b.String(), nil
	}
	fmt.Fprintf(&b, "| mirrorloom | script | to reach | verdict |\n| --- | --- | --- | --- |\n| %s, `--memory %s` | fails: %s | a larger ratio than at 255 frames, or the script fails for memory | %s |\n",
		figures(o.ours), o.memory, o.failed, judged(true))
	return b.String(), nil
}
