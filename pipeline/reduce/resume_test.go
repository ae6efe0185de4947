package reduce

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// resumeCase is a night whose reduction is interrupted.
type resumeCase struct {
	name   string
	edit   func(p *instrument.Profile, target *sequence.Target, scene *rehearse.Scene)
	faults []string
	recipe string
	// memory is that of the smallest buffers.
	memory int64
}

// dark9 makes the code one that restores: 31 columns, 9 of them dark.
func dark9(_ *instrument.Profile, target *sequence.Target, _ *rehearse.Scene) {
	v, dark := 31, 9
	target.Code.V, target.Code.Dark, target.Code.ElementMirrors = &v, &dark, 1
}

const starList = "name,ra_deg,dec_deg\nA,123.30026888,21.59961111\n"

func resumeCases() []resumeCase {
	return []resumeCase{
		{"restored", func(p *instrument.Profile, target *sequence.Target, scene *rehearse.Scene) {
			dark9(p, target, scene)
			*scene.Sources[0].ABMag = 9.5 // saturates
		}, []string{"cosmic=3", "drift=0.03", "lost=1"}, "flat: {use: off}\narc: {use: off}\nstars: {use: STARS}\n", 700 << 10},
		{"lamps", func(p *instrument.Profile, target *sequence.Target, scene *rehearse.Scene) {
			dark9(p, target, scene)
			target.Code.Cycles = 2
			target.Calibration.Flat = sequence.FlatFrames{Count: 1, DwellSeconds: 5, Lamp: "halogen"}
		}, []string{"cosmic=1", "drift=0.03"}, "sky: {use: auto}\ngrid: {use: auto, refraction: auto}\n", 1 << 20},
		{"stuck mirrors", func(p *instrument.Profile, target *sequence.Target, scene *rehearse.Scene) {
			dark9(p, target, scene)
			if err := p.SetStuck("stuck.csv", []instrument.StuckMirror{{Column: 12, Row: 9}, {Column: 15, Row: 17, On: true}, {Column: 16, Row: 22}, {Column: 20, Row: 27}}); err != nil {
				panic(err)
			}
		}, []string{"cosmic=1"}, "flat: {use: off}\narc: {use: off}\n", 900 << 10},
		{"edges", func(*instrument.Profile, *sequence.Target, *rehearse.Scene) {}, []string{"cosmic=3"}, "flat: {use: off}\narc: {use: off}\n", 300 << 10},
		{"slit scan", func(_ *instrument.Profile, target *sequence.Target, _ *rehearse.Scene) {
			target.Code.Family, target.Code.Dark = "slit-scan", nil
		}, nil, "flat: {use: off}\narc: {use: off}\n", 300 << 10},
	}
}

// resumable is a night with what its whole reduction gives.
type resumable struct {
	night, seq string
	recipe     *Recipe
	memory     int64
	want       map[string]string
}

func newResumable(t *testing.T, c resumeCase) *resumable {
	t.Helper()
	p, target, scene := tiny(t)
	c.edit(p, target, scene)
	night, seq := robustNight(t, p, target, scene, c.faults...)
	n := &resumable{night: night, seq: seq, recipe: writeRecipe(t, c.recipe), memory: c.memory}
	out := t.TempDir()
	_, err := Run(context.Background(), n.options(out, 0, nil))
	require.NoError(t, err)
	n.want = productsOf(t, out)
	return n
}

func writeRecipe(t *testing.T, text string) *Recipe {
	t.Helper()
	dir := t.TempDir()
	stars := filepath.Join(dir, "stars.csv")
	require.NoError(t, os.WriteFile(stars, []byte(starList), 0o644))
	path := filepath.Join(dir, "recipe.yaml")
	require.NoError(t, os.WriteFile(path, []byte(strings.ReplaceAll(text, "STARS", stars)), 0o644))
	recipe, err := LoadRecipe(path)
	require.NoError(t, err)
	return recipe
}

// options of a reduction that resumes; turn chooses its memory and workers.
func (n *resumable) options(out string, turn int, said *[]string) Options {
	o := Options{
		Night: n.night, Sequence: n.seq, Recipe: n.recipe, Cube: true, Elements: true, Out: out, Resume: true, eachStrip: true,
		MemoryBytes: runtimeBytes + []int64{2, 128, 4, 3}[turn%4]*n.memory/2, Workers: 1 + turn%3,
	}
	if said != nil {
		o.Note = func(text string) { *said = append(*said, text) }
	}
	return o
}

// productsOf reads a run: its products, and of run.json all but times and what was asked.
func productsOf(t *testing.T, out string) map[string]string {
	t.Helper()
	all := map[string]string{}
	for _, name := range []string{product.CubeFile, product.ElementsFile, product.LedgerFile, product.RunFile} {
		data, err := os.ReadFile(filepath.Join(out, name))
		require.NoError(t, err)
		all[name] = string(data)
	}
	var run map[string]any
	require.NoError(t, json.Unmarshal([]byte(all[product.RunFile]), &run))
	delete(run, "stages")
	settings := run["settings"].(map[string]any)
	delete(settings, "memory_bytes")
	delete(settings, "workers")
	text, err := json.MarshalIndent(run, "", " ")
	require.NoError(t, err)
	all[product.RunFile] = string(text)
	return all
}

// requireWhole compares a run with that of the whole reduction.
func (n *resumable) requireWhole(t *testing.T, out, when string) {
	t.Helper()
	got := productsOf(t, out)
	require.Equal(t, n.want[product.RunFile], got[product.RunFile], when)
	for name, want := range n.want {
		require.True(t, want == got[name], "%s, %s", name, when)
	}
	entries, err := os.ReadDir(out)
	require.NoError(t, err)
	require.LessOrEqual(t, len(entries), 5, "%s: nothing is left", when)
}

// copies runs the reduction and copies its folder at each step of its progress, as if it
// had been killed there. The copies are named after the steps.
func (n *resumable) copies(t *testing.T, turn int) (dirs, names []string) {
	t.Helper()
	out, top := t.TempDir(), t.TempDir()
	o := n.options(out, turn, nil)
	o.Progress = func(stage string, done, total int) {
		if stage == "pair" || stage == "audit" || stage == "flats" || stage != "strips" && done < total {
			return // nothing is kept there that is not kept at its end
		}
		name := fmt.Sprintf("%02d %s %d of %d", len(names), stage, done, total)
		dirs, names = append(dirs, filepath.Join(top, fmt.Sprint(len(dirs)))), append(names, name)
		require.NoError(t, os.CopyFS(dirs[len(dirs)-1], os.DirFS(out)))
	}
	_, err := Run(context.Background(), o)
	require.NoError(t, err)
	return dirs, names
}

// A run that was killed at any step of its progress and is gone on with gives the same
// bytes, also with other memory and workers.
func TestResumedProductsAreTheSame(t *testing.T) {
	for _, c := range resumeCases() {
		t.Run(c.name, func(t *testing.T) {
			n := newResumable(t, c)
			dirs, names := n.copies(t, 0)
			resumed := 0
			for i, dir := range dirs {
				var said []string
				_, err := Run(context.Background(), n.options(dir, 1+i, &said))
				require.NoError(t, err, names[i])
				n.requireWhole(t, dir, names[i])
				if len(said) > 0 {
					require.Regexp(t, `^the unfinished run is gone on with: (\d+ of 40 rows of the detector are done|its calibration is done)$`, said[0])
					resumed++
				}
			}
			require.GreaterOrEqual(t, resumed, 4, "%v", names)
		})
	}
}

// A run that is cancelled keeps its last strip, again and again.
func TestCancelledRunsGoOn(t *testing.T) {
	n := newResumable(t, resumeCases()[0])
	out, turns := t.TempDir(), 0
	for ; ; turns++ {
		ctx, cancel := context.WithCancel(context.Background())
		o := n.options(out, 0, nil)
		o.eachStrip = false
		strips := 0
		o.Progress = func(stage string, _, _ int) {
			if stage == "strips" {
				if strips++; strips == 2+turns {
					cancel()
				}
			}
		}
		_, err := Run(ctx, o)
		cancel()
		if err == nil {
			break
		}
		require.ErrorIs(t, err, context.Canceled)
		require.True(t, CanResume(out))
		require.Less(t, turns, 40)
	}
	require.Greater(t, turns, 2)
	n.requireWhole(t, out, fmt.Sprint(turns))
}
