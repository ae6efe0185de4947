package trial

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/combine"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// Displaced is the same sky with the telescope so many elements and rows further on: the
// first voxel of its cube lies there in that of f.
func (f *Field) Displaced(elements, rows float64) *Field {
	c1, c2 := f.Profile.VoxelDeg(f.Target.Code.ElementMirrors)
	east, north := f.SkyOf(3600*c1*elements, 3600*c2*rows)
	target, scene := *f.Target, *f.Scene
	target.RADeg, target.DecDeg = physics.FromGnomonic(east, north, f.Target.RADeg, f.Target.DecDeg)
	scene.Sources = nil
	for _, s := range f.Scene.Sources {
		s.EastArcsec -= east
		s.NorthArcsec -= north
		scene.Sources = append(scene.Sources, s)
	}
	return &Field{Profile: f.Profile, Target: &target, Scene: &scene, Imperfect: f.Imperfect}
}

// Combination is a combined cube with what it should be.
type Combination struct {
	Cube *Cube
	// Expected is the variance that the twins' VARIANCE predicts for the mean of the runs
	// that are good; Truth the mean of their truths by the same weights, which differ at
	// the ends of the slit alone, where the optics blur light away. Both are not a number
	// where no run is good.
	Truth, Expected []float32
	// alone are the runs on the combined cube's voxels, and differs the largest
	// difference of two runs' truths away from the slit's ends, over the largest truth.
	alone   []aloneRun
	differs float64
	// onto: the later runs were reduced onto the voxels of the first, whose truth is theirs.
	onto  bool
	inner [2]int // first and last good row of the first night, if onto
}

type aloneRun struct {
	cube            *Cube
	truth, expected []float32
	j0, y0          int
}

// Combine combines the noisy nights of Pairs, in which folder does not matter, into dir.
func Combine(ctx context.Context, dir string, nights []*Night) (*Combination, error) {
	return combineAll(ctx, dir, nights, false)
}

// CombineOnto does so with nights of which all but the first were reduced onto it: see
// PairOnto. Truth is that of the first night, in its inner rows alone.
func CombineOnto(ctx context.Context, dir string, nights []*Night) (*Combination, error) {
	return combineAll(ctx, dir, nights, true)
}

func combineAll(ctx context.Context, dir string, nights []*Night, onto bool) (*Combination, error) {
	opts := combine.Options{Out: dir}
	for _, n := range nights {
		opts.Runs = append(opts.Runs, n.Run(Noisy))
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, err
	}
	result, err := combine.Run(ctx, opts)
	if err != nil {
		return nil, err
	}
	if len(result.Degraded) > 0 {
		return nil, fmt.Errorf("combined nights without a fault are not whole: %v", result.Degraded)
	}
	c := &Combination{onto: onto}
	if c.Cube, err = ReadCube(filepath.Join(dir, "cube.fits")); err != nil {
		return nil, err
	}
	c.Truth, c.Expected = notNumbers(len(c.Cube.Signal)), notNumbers(len(c.Cube.Signal))
	for i, n := range nights {
		truth := n.TruthPath(Noisy)
		if onto {
			truth = nights[0].TruthPath(Noisy)
		}
		if err := c.add(n, truth, result.Run.Combined[i].Element, result.Run.Combined[i].Row); err != nil {
			return nil, err
		}
	}
	return c, nil
}

func notNumbers(n int) []float32 {
	all := make([]float32, n)
	for i := range all {
		all[i] = float32(math.NaN())
	}
	return all
}

// add takes a night whose first voxel lies at element j0, row y0, and the file of its truth.
func (c *Combination) add(n *Night, truthPath string, j0, y0 int) error {
	own, err := ReadCube(n.CubePath(Noisy))
	if err != nil {
		return err
	}
	truth, err := own.ReadTruth(truthPath)
	if err != nil {
		return err
	}
	twin, err := ReadCube(n.CubePath(Twin))
	if err != nil {
		return err
	}
	first, last := own.goodRows()
	if c.onto {
		c.keepInner(own, truth)
	}
	inside := func(y int) bool { return y >= first+slitEnd && y <= last-slitEnd }
	largest := 0.0
	for i, t := range truth {
		if own.Good(i) && t == t {
			largest = max(largest, float64(t))
		}
	}
	c.alone = append(c.alone, aloneRun{own, truth, twin.Variance, j0, y0})
	for i, t := range truth {
		v := twin.Variance[i]
		if !own.Good(i) || t != t || !(v > 0) {
			continue
		}
		at := c.index(own, i, j0, y0)
		e := c.Expected[at]
		if e != e {
			c.Truth[at], c.Expected[at] = t, v
			continue
		}
		if inside(i/own.N%own.Rows) && inside(at/c.Cube.N%c.Cube.Rows-c.alone[0].y0) {
			c.differs = max(c.differs, math.Abs(float64(c.Truth[at]-t))/largest)
		}
		c.Truth[at] = (c.Truth[at]/e + t/v) / (1/e + 1/v)
		c.Expected[at] = 1 / (1/e + 1/v)
	}
	return nil
}

// keepInner takes the truth away from rows near the slit's ends, whose light the optics
// blur away: in a night that was reduced onto another one's voxels from other rows.
func (c *Combination) keepInner(own *Cube, truth []float32) {
	if c.alone == nil {
		c.inner[0], c.inner[1] = own.goodRows()
	}
	for i := range truth {
		if y := i / own.N % own.Rows; y < c.inner[0]+ontoEnd || y > c.inner[1]-ontoEnd {
			truth[i] = float32(math.NaN())
		}
	}
}

// ontoEnd is how many rows from the end of the first night's slit are left out: six that
// are blurred, as the test of grid.onto has it, and two for the telescope's displacement.
const ontoEnd = 8

// slitEnd is how many rows from the end of the mirrors the optics still blur away light.
const slitEnd = 12

// goodRows are the first and the last row with a good voxel.
func (c *Cube) goodRows() (first, last int) {
	first, last = c.Rows, -1
	for i := range c.Flags {
		if c.Good(i) {
			first, last = min(first, i/c.N%c.Rows), max(last, i/c.N%c.Rows)
		}
	}
	return first, last
}

// index is the place in the combined cube of voxel i of a run.
func (c *Combination) index(run *Cube, i, j0, y0 int) int {
	j, y, l := i%run.N, i/run.N%run.Rows, i/run.N/run.Rows
	return (l*c.Cube.Rows+y+y0)*c.Cube.N + j + j0
}

// Findings judge pulls, in deciles too, and the gain in S/N over each night alone where
// all nights are good.
func (c *Combination) Findings(name string) ([]Finding, error) {
	pulls, err := NewPulls(c.Cube, c.Truth, c.Expected, 1)
	if err != nil {
		return nil, err
	}
	small, err := NewPulls(c.Cube, c.Truth, c.Expected, 0.85)
	if err != nil {
		return nil, err
	}
	list := append(pulls.FaultyFindings(name),
		MustFail(name+": the pulls' check, VARIANCE scaled by 0.85", small.FaultyFindings(name)))
	if !c.onto { // which have one truth
		list = append(list, Below(name+": the nights' truths differ, away from the slit's ends, of the largest", c.differs, 1e-3, len(c.Truth)))
	}
	for k := range c.alone {
		list = append(list, c.gain(name, k))
	}
	return list, nil
}

// gain compares the S/N of the combined cube, over that of a night, with what the twins'
// variances predict. Signal is the same: S/N goes as the inverse root of the mean square
// deviation from the truth, each voxel in units of its predicted error.
func (c *Combination) gain(name string, k int) Finding {
	run := c.alone[k]
	var own, all, predicted Moments
	for i := range run.cube.Signal {
		at := c.index(run.cube, i, run.j0, run.y0)
		t, v, e := float64(c.Truth[at]), float64(run.expected[i]), float64(c.Expected[at])
		if !run.cube.Good(i) || !c.goodInAll(i, k) || !(v > 0) || !(e > 0) || t != t {
			continue
		}
		own.Add((float64(run.cube.Signal[i]) - float64(run.truth[i])) / math.Sqrt(v))
		all.Add((float64(c.Cube.Signal[at]) - t) / math.Sqrt(v))
		predicted.Add(e / v)
	}
	n := own.N / 2
	measured := math.Sqrt(own.meanSquare() / all.meanSquare())
	want := 1 / math.Sqrt(predicted.Mean())
	return Near(fmt.Sprintf("%s: S/N over that of night %d, %.4f, over the predicted %.4f", name, k+1, measured, want), measured/want, 1, 0.05, 1/math.Sqrt(float64(n)), n)
}

func (m *Moments) meanSquare() float64 { return m.square / float64(m.N) }

// goodInAll tells whether the voxel of run k is good in the others too.
func (c *Combination) goodInAll(i, k int) bool {
	run := c.alone[k]
	j, y, l := i%run.cube.N+run.j0, i/run.cube.N%run.cube.Rows+run.y0, i/run.cube.N/run.cube.Rows
	for _, o := range c.alone {
		jo, yo := j-o.j0, y-o.y0
		if jo < 0 || jo >= o.cube.N || yo < 0 || yo >= o.cube.Rows || !o.cube.Good((l*o.cube.Rows+yo)*o.cube.N+jo) {
			return false
		}
	}
	return true
}

// PairDisplaced makes Pairs of f and of f displaced, the second of so many cycles.
func (f *Field) PairDisplaced(ctx context.Context, dir string, elements, rows float64, cycles int, seed uint64) ([]*Night, error) {
	first, _, err := f.Pair(ctx, filepath.Join(dir, "first"), seed)
	if err != nil {
		return nil, err
	}
	g := f.Displaced(elements, rows)
	g.Target.Code.Cycles = cycles
	second, _, err := g.Pair(ctx, filepath.Join(dir, "second"), seed+1)
	return []*Night{first, second}, err
}

// PairOnto makes Pairs of f and of f displaced by no whole number of voxels, the second
// reduced onto the voxels of the first's noisy night.
func (f *Field) PairOnto(ctx context.Context, dir string, elements, rows float64, seed uint64) ([]*Night, error) {
	first, _, err := f.Pair(ctx, filepath.Join(dir, "first"), seed)
	if err != nil {
		return nil, err
	}
	second, err := f.Displaced(elements, rows).Plan(ctx, filepath.Join(dir, "second"))
	if err != nil {
		return nil, err
	}
	recipe, err := reduce.LoadRecipe("nominal")
	if err != nil {
		return nil, err
	}
	recipe.Grid.Onto = first.CubePath(Noisy)
	for _, name := range []string{Noisy, Twin} {
		if err := second.Rehearse(ctx, name, rehearse.Options{Seed: seed + 1, Noiseless: name == Twin, NoTruth: true}); err != nil {
			return nil, err
		}
		if _, err := second.Reduce(ctx, name, reduce.Options{Cube: true, Recipe: recipe}); err != nil {
			return nil, err
		}
	}
	return []*Night{first, second}, nil
}
