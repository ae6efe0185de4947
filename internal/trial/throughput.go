package trial

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// ThroughputErrors compares the throughput in a night's ledger with the truth.
type ThroughputErrors struct {
	N int // frames
	// True is the rms of the truth around 1, Measured that of the error, Predicted
	// that of the ledger's standard errors.
	True, Measured, Predicted float64
}

// Throughput reads the ledger of the night named name.
func (n *Night) Throughput(name string) (*ThroughputErrors, error) {
	ledger, err := product.ReadLedger(filepath.Join(n.Run(name), product.LedgerFile))
	if err != nil {
		return nil, err
	}
	truth, err := n.Faults(name)
	if err != nil {
		return nil, err
	}
	// Both have a mean of 1 over the frames used.
	mean := 0.0
	t := new(ThroughputErrors)
	for _, e := range ledger {
		if e.Step > 0 && e.Verdict.Used() && e.Kind == string(sequence.Science) {
			t.N++
			mean += truth.Frames[e.Step-1].Throughput
		}
	}
	mean /= float64(t.N)
	for _, e := range ledger {
		if e.Step == 0 || !e.Verdict.Used() || e.Kind != string(sequence.Science) {
			continue
		}
		if math.IsNaN(e.Throughput) {
			return nil, fmt.Errorf("step %d has no throughput", e.Step)
		}
		c := truth.Frames[e.Step-1].Throughput / mean
		t.True += (c - 1) * (c - 1) / float64(t.N)
		t.Measured += (e.Throughput - c) * (e.Throughput - c) / float64(t.N)
		t.Predicted += e.ThroughputErr * e.ThroughputErr / float64(t.N)
	}
	t.True, t.Measured, t.Predicted = math.Sqrt(t.True), math.Sqrt(t.Measured), math.Sqrt(t.Predicted)
	return t, nil
}

// Drifting is a field's night whose frames drift, reduced with and without the
// correction, beside one that does not drift.
type Drifting struct {
	C *ThroughputErrors
	// Steady, Corrected and Raw are the rms of cube - truth over the good voxels: of
	// the night that does not drift, and of the other with and without correction.
	Steady, Corrected, Raw float64
	Pulls                  *Pulls // of the corrected night
	Result                 *reduce.Result
}

const (
	steady = "steady"
)

// Drift rehearses the nights of a planned field, with the same noise, and reduces
// them. The folders are removed.
func (n *Night) Drift(ctx context.Context, seed uint64, faults ...rehearse.Fault) (*Drifting, error) {
	corrected, err := reduce.LoadRecipe(n.recipe())
	if err != nil {
		return nil, err
	}
	corrected.Throughput.Use = "auto"
	uncorrected := *corrected
	uncorrected.Throughput.Use = "off"
	d := new(Drifting)
	for _, night := range []struct {
		name   string
		opts   rehearse.Options
		recipe *reduce.Recipe
	}{
		{Noisy, rehearse.Options{Seed: seed, Faults: faults}, corrected},
		{Twin, rehearse.Options{Seed: seed, Noiseless: true, NoTruth: true}, &uncorrected},
		{steady, rehearse.Options{Seed: seed, NoTruth: true}, &uncorrected},
	} {
		if err := n.Rehearse(ctx, night.name, night.opts); err != nil {
			return nil, err
		}
		defer os.RemoveAll(n.Frames(night.name))
		defer os.RemoveAll(n.Run(night.name))
		result, err := n.Reduce(ctx, night.name, reduce.Options{Cube: true, Recipe: night.recipe})
		if err != nil {
			return nil, err
		}
		if night.name == Noisy {
			d.Result = result
		}
	}
	if d.C, err = n.Throughput(Noisy); err != nil {
		return nil, err
	}
	pulls, cube, err := n.PullsOf(1)
	if err != nil {
		return nil, err
	}
	d.Pulls = pulls
	truth, err := cube.ReadTruth(n.TruthPath(Noisy))
	if err != nil {
		return nil, err
	}
	d.Corrected = cube.rms(truth)
	still, err := ReadCube(n.CubePath(steady))
	if err != nil {
		return nil, err
	}
	d.Steady = still.rms(truth)
	if err := os.RemoveAll(n.Run(Noisy)); err != nil {
		return nil, err
	}
	if _, err := n.Reduce(ctx, Noisy, reduce.Options{Cube: true, Recipe: &uncorrected}); err != nil {
		return nil, err
	}
	drifted, err := ReadCube(n.CubePath(Noisy))
	if err != nil {
		return nil, err
	}
	d.Raw = drifted.rms(truth)
	return d, nil
}

// DriftOnly rehearses and reduces such a night for its throughput alone.
func (n *Night) DriftOnly(ctx context.Context, seed uint64, faults ...rehearse.Fault) (*ThroughputErrors, error) {
	recipe, err := reduce.LoadRecipe(n.recipe())
	if err != nil {
		return nil, err
	}
	recipe.Throughput.Use = "auto"
	defer os.RemoveAll(n.Frames(Noisy))
	defer os.RemoveAll(n.Run(Noisy))
	if err := n.Rehearse(ctx, Noisy, rehearse.Options{Seed: seed, NoTruth: true, Faults: faults}); err != nil {
		return nil, err
	}
	if _, err := n.Reduce(ctx, Noisy, reduce.Options{Cube: true, Recipe: recipe}); err != nil {
		return nil, err
	}
	return n.Throughput(Noisy)
}

// recipe is the name of the recipe that suits the field.
func (n *Night) recipe() string {
	if n.Field.Imperfect {
		return reduce.DefaultRecipe
	}
	return "nominal"
}

// rms is that of cube - truth over the good voxels.
func (c *Cube) rms(truth []float32) float64 {
	var m Moments
	for i, t := range truth {
		if c.Good(i) && t == t {
			m.Add(float64(c.Signal[i] - t))
		}
	}
	return math.Hypot(m.Mean(), m.Std())
}
