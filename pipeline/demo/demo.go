package demo

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"go.uber.org/zap"

	"mirrorloom/configs"
	"mirrorloom/pipeline/nightsheet"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// The embedded configurations of the demo, and the names of their copies.
const (
	profileName = "optical"
	targetName  = "demo"
	sceneName   = "demo"
	seed        = 1

	ProfileFile    = "profile.yaml"
	TargetFile     = "target.yaml"
	SceneFile      = "scene.yaml"
	SequenceFolder = "sequence"
	NightFolder    = "night"
	RunFolder      = "run"
)

// Options of Run.
type Options struct {
	// Out is a folder that exists and is empty. A folder in which Run failed is
	// to be removed.
	Out string
	Log *zap.Logger
	// Progress, which may be nil, is called as a stage gets on.
	Progress func(stage string, done, total int)
}

// Result is what the demo shows.
type Result struct {
	Plan      *plan.Summary     `json:"plan"`
	Rehearsal *rehearse.Summary `json:"rehearsal"`
	Run       *product.Run      `json:"run"`
	Degraded  []string          `json:"degraded"`
	Agreement *Agreement        `json:"agreement"`
	Stages    []product.Stage   `json:"stages"`
}

// Run makes the demo. The rehearsed instrument is not quite the profile's, and
// the reduction calibrates it by its lamps.
func Run(ctx context.Context, opts Options) (*Result, error) {
	if opts.Progress == nil {
		opts.Progress = func(string, int, int) {}
	}
	r := new(Result)
	for _, step := range []struct {
		name string
		run  func(context.Context, Options) error
	}{
		{"copy", copyConfigurations}, {"plan", r.plan}, {"rehearse", r.rehearse}, {"reduce", r.reduce}, {"compare", r.compare},
	} {
		start := time.Now()
		if err := step.run(ctx, opts); err != nil {
			return nil, err
		}
		r.Stages = append(r.Stages, product.Stage{Name: step.name, Seconds: time.Since(start).Seconds()})
	}
	return r, nil
}

// copyConfigurations writes the configurations that the demo is made from, for
// the user to read, change and run again.
func copyConfigurations(_ context.Context, o Options) error {
	for _, c := range []struct{ folder, name, file string }{
		{configs.Profiles, profileName, ProfileFile},
		{configs.Targets, targetName, TargetFile},
		{configs.Scenes, sceneName, SceneFile},
	} {
		text, err := configs.Read(c.folder, c.name)
		if err != nil {
			return err
		}
		if err := os.WriteFile(filepath.Join(o.Out, c.file), text, 0o644); err != nil {
			return fmt.Errorf("copy the demo's configuration: %w", err)
		}
	}
	return nil
}

func (r *Result) plan(ctx context.Context, o Options) (err error) {
	dir, err := folder(o, SequenceFolder)
	if err != nil {
		return err
	}
	r.Plan, err = plan.Run(ctx, plan.Options{
		Target: filepath.Join(o.Out, TargetFile), Profile: filepath.Join(o.Out, ProfileFile), Out: dir, Sheet: nightsheet.Write,
	})
	return err
}

func (r *Result) rehearse(ctx context.Context, o Options) error {
	dir, err := folder(o, NightFolder)
	if err != nil {
		return err
	}
	seq, err := sequence.Read(ctx, filepath.Join(o.Out, SequenceFolder))
	if err != nil {
		return err
	}
	scene, err := rehearse.LoadScene(filepath.Join(o.Out, SceneFile))
	if err != nil {
		return err
	}
	r.Rehearsal, err = rehearse.Run(ctx, seq, scene, rehearse.Options{Seed: seed}, dir,
		func(done, total int) { o.Progress("rehearse", done, total) })
	return err
}

func (r *Result) reduce(ctx context.Context, o Options) error {
	dir, err := folder(o, RunFolder)
	if err != nil {
		return err
	}
	result, err := reduce.Run(ctx, reduce.Options{
		Night: filepath.Join(o.Out, NightFolder), Sequence: filepath.Join(o.Out, SequenceFolder),
		NightName: NightFolder, SequenceName: SequenceFolder, // o.Out gets another name in the end
		Cube: true, Out: dir, Log: o.Log, Progress: o.Progress,
	})
	if err != nil {
		return err
	}
	r.Run, r.Degraded = result.Run, result.Degraded
	return nil
}

func (r *Result) compare(_ context.Context, o Options) (err error) {
	r.Agreement, err = Compare(
		filepath.Join(o.Out, RunFolder, product.CubeFile),
		filepath.Join(o.Out, NightFolder, rehearse.TruthFolder, rehearse.TruthFile))
	return err
}

func folder(o Options, name string) (string, error) {
	dir := filepath.Join(o.Out, name)
	if err := os.Mkdir(dir, 0o755); err != nil {
		return "", fmt.Errorf("make the demo's folder: %w", err)
	}
	return dir, nil
}
