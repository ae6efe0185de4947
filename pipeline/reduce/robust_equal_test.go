package reduce

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
	"go.uber.org/zap"
	"go.uber.org/zap/zaptest/observer"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// tiny is the invented field of testdata/tiny.
func tiny(t *testing.T) (*instrument.Profile, *sequence.Target, *rehearse.Scene) {
	dir := filepath.Join(outside.Root(t), "testdata", "tiny")
	profile, err := instrument.Load(filepath.Join(dir, "profile.yaml"))
	require.NoError(t, err)
	target, err := sequence.LoadTarget(filepath.Join(dir, "target.yaml"))
	require.NoError(t, err)
	scene, err := rehearse.LoadScene(filepath.Join(dir, "scene.yaml"))
	require.NoError(t, err)
	return profile, target, scene
}

// robustNight plans and rehearses into a new folder and returns night and
// sequence.
func robustNight(t *testing.T, p *instrument.Profile, target *sequence.Target, scene *rehearse.Scene, faults ...string) (night, seqDir string) {
	ctx, dir := context.Background(), t.TempDir()
	night, seqDir = filepath.Join(dir, "night"), filepath.Join(dir, "seq")
	require.NoError(t, p.Validate())
	seq, _, err := plan.Build(ctx, target, p)
	require.NoError(t, err)
	require.NoError(t, seq.Write(ctx, seqDir))
	opts := rehearse.Options{Seed: 11, Perfect: true, NoTruth: true}
	for _, text := range faults {
		f, err := rehearse.ParseFault(text)
		require.NoError(t, err)
		opts.Faults = append(opts.Faults, f)
	}
	require.NoError(t, os.Mkdir(night, 0o755))
	_, err = rehearse.Run(ctx, seq, scene, opts, night, nil)
	require.NoError(t, err)
	return night, seqDir
}

// Every product has the same bytes whatever the workers and the memory: for
// codes of uniform and of own variances, along a trace that leaves its row, with
// hits, saturation, blank calibrations, lost frames, several cycles, sentinel and
// closed rows, with and without overscan, and strips of which the last is not
// whole.
func TestProductsDoNotDependOnWorkersOrMemory(t *testing.T) {
	for _, c := range []struct {
		name   string
		edit   func(p *instrument.Profile, target *sequence.Target, scene *rehearse.Scene)
		faults []string
	}{
		{"m-sequence", func(_ *instrument.Profile, _ *sequence.Target, scene *rehearse.Scene) {
			*scene.Sources[0].ABMag = 9 // saturates
		}, []string{"cosmic=3", "offset=5", "drift=0.02"}},
		{"slit scan", func(_ *instrument.Profile, target *sequence.Target, _ *rehearse.Scene) {
			target.Code.Family = "slit-scan"
			target.Code.Dark = nil
		}, []string{"cosmic=3"}},
		{"lost frame, two cycles", func(_ *instrument.Profile, target *sequence.Target, _ *rehearse.Scene) {
			target.Code.Cycles = 2
		}, []string{"lost=9", "cosmic=1"}},
		{"slit scan with a lost frame", func(_ *instrument.Profile, target *sequence.Target, _ *rehearse.Scene) {
			target.Code.Family = "slit-scan"
			target.Code.Dark = nil
		}, []string{"lost=1"}},
		{"sentinel and closed rows", func(_ *instrument.Profile, target *sequence.Target, _ *rehearse.Scene) {
			four := 4
			target.SentinelRows = []sequence.SentinelRow{{First: 12, Last: 13, Element: 5}}
			target.Closed = []sequence.ClosedRow{{First: 20, Last: 22}, {First: 25, Last: 26, Element: &four}}
		}, nil},
		{"no overscan, no calibration", func(p *instrument.Profile, target *sequence.Target, _ *rehearse.Scene) {
			p.Detector.Amplifiers[0].Overscan, p.Detector.Amplifiers[1].Overscan = nil, nil
			target.Calibration = sequence.Calibration{Arc: sequence.ArcFrames{Every: 1}}
			target.AllOffEvery = 0
		}, nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			p, target, scene := tiny(t)
			c.edit(p, target, scene)
			night, seq := robustNight(t, p, target, scene, c.faults...)
			compareRuns(t, night, seq)
		})
	}
	few := prepare{camera: &exposure.Camera{Columns: 96, Rows: 40}, memory: robustBudgets[2]}
	require.Less(t, few.height(), 40, "the masters are made in several strips as well")
}

// robustBudgets are memories for buffers, besides that of the program itself. Their strips must differ.
var robustBudgets = []int64{64 << 20, 760 << 10, 300 << 10}

func compareRuns(t *testing.T, night, seq string) {
	var first map[string][]byte
	seen := map[int64]bool{}
	for _, buffers := range robustBudgets {
		for _, workers := range []int{1, 2, 5} {
			products, height := reduceWithin(t, night, seq, buffers, workers)
			seen[height] = true
			if first == nil {
				first = products
			}
			for name, data := range first {
				require.True(t, string(data) == string(products[name]), "%s with %d workers in strips of %d rows", name, workers, height)
			}
		}
	}
	require.Len(t, seen, len(robustBudgets), "each memory gives a height of its own: %v", seen)
	t.Logf("strips of %v rows", seen)
	partial := false
	for h := range seen {
		partial = partial || 40%h != 0
	}
	require.True(t, partial, "some last strip is not whole: %v", seen)
}

// reduceWithin reduces with so much memory for buffers, and returns the
// products and the height of the strips.
func reduceWithin(t *testing.T, night, seq string, buffers int64, workers int) (map[string][]byte, int64) {
	core, logged := observer.New(zap.DebugLevel)
	out := t.TempDir()
	_, err := Run(context.Background(), Options{
		Night: night, Sequence: seq, Cube: true, Elements: true, Out: out,
		MemoryBytes: runtimeBytes + buffers, Workers: workers, Log: zap.New(core),
	})
	require.NoError(t, err)
	strips := logged.FilterMessage("strips").All()
	require.Len(t, strips, 1)
	products := map[string][]byte{}
	for _, name := range []string{product.CubeFile, product.ElementsFile, product.LedgerFile} {
		products[name], err = os.ReadFile(filepath.Join(out, name))
		require.NoError(t, err)
		require.NotEmpty(t, products[name])
	}
	return products, strips[0].ContextMap()["rows"].(int64)
}

// What a budget of heights promises: the buffers it counts fit into the memory,
// and the least that its error names is enough.
func TestTooLittleMemoryNamesTheLeast(t *testing.T) {
	s := shape{columns: 2048, rows: 2048, slots: 1023, elements: 895, voxels: 1200, margin: 12, uniform: true, cube: true, elementCube: true}
	_, err := s.heights(100 << 20)
	require.ErrorContains(t, err, "--memory of 100 MiB is too little for frames of 2048 x 2048 pixels")
	var least int64
	_, scanErr := fmt.Sscanf(err.Error(), "--memory of 100 MiB is too little for frames of 2048 x 2048 pixels; give at least %d MiB", &least)
	require.NoError(t, scanErr)
	h, err := s.heights(least << 20)
	require.NoError(t, err)
	require.Equal(t, 1, h.strip)
	_, err = s.heights((least - 1) << 20)
	require.Error(t, err)
	for _, memory := range []int64{least << 20, 512 << 20, 2 << 30} {
		h, err := s.heights(memory)
		require.NoError(t, err)
		require.LessOrEqual(t, runtimeBytes+s.outBytes(h.out)+int64(h.strip)*(s.stripRow()+s.window(1)), memory)
	}
}
