package reduce

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync/atomic"
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

// What is not as it was left is noticed: the run starts over, or its strips do, and says
// so; the products are always those of a whole reduction.
func TestChangedLeftoversAreNoticed(t *testing.T) {
	n := newResumable(t, resumeCases()[0])
	dirs, names := n.copies(t, 0)
	at := -1
	for i, name := range names {
		if strings.Contains(name, "strips") && at < 0 && i+3 < len(names) && strings.Contains(names[i+3], "strips") {
			at = i + 3
		}
	}
	require.Positive(t, at)
	left := dirs[at]
	scratch := func(name string) func(dir string) string {
		return func(dir string) string { return filepath.Join(dir, "scratch", name) }
	}
	cube := func(dir string) string {
		found, err := filepath.Glob(filepath.Join(dir, ".cube.fits.*.part"))
		require.NoError(t, err)
		require.Len(t, found, 1)
		return found[0]
	}
	flip := func(file func(dir string) string, part float64) func(t *testing.T, dir string) {
		return func(t *testing.T, dir string) {
			data, err := os.ReadFile(file(dir))
			require.NoError(t, err)
			data[int(part*float64(len(data)-1))] ^= 4
			require.NoError(t, os.WriteFile(file(dir), data, 0o644))
		}
	}
	cut := func(file func(dir string) string, part float64) func(t *testing.T, dir string) {
		return func(t *testing.T, dir string) {
			info, err := os.Stat(file(dir))
			require.NoError(t, err)
			require.NoError(t, os.Truncate(file(dir), int64(part*float64(info.Size()))))
		}
	}
	remove := func(file func(dir string) string) func(t *testing.T, dir string) {
		return func(t *testing.T, dir string) { require.NoError(t, os.RemoveAll(file(dir))) }
	}
	const over, anew, on = "the unfinished run is started over: ", "the strips of the unfinished run are begun anew: ", "the unfinished run is gone on with: "
	for _, c := range []struct {
		name   string
		change func(t *testing.T, dir string)
		said   string
	}{
		{"nothing", func(*testing.T, string) {}, on},
		{"journal torn", cut(scratch(journalFile), 0.95), on},
		{"journal emptied", cut(scratch(journalFile), 0), anew},
		{"journal without strips", cut(scratch(journalFile), 0.02), on + "its calibration"},
		{"journal deleted", remove(scratch(journalFile)), on + "its calibration"},
		{"journal's last byte", flip(scratch(journalFile), 1), on},
		{"journal's first byte", flip(scratch(journalFile), 0), anew},
		{"journal's middle", flip(scratch(journalFile), 0.5), on},
		{"state's first byte", flip(scratch(preparedFile), 0), over},
		{"state's middle", flip(scratch(preparedFile), 0.5), over},
		{"state cut", cut(scratch(preparedFile), 0.9), over},
		{"state emptied", cut(scratch(preparedFile), 0), over},
		{"state deleted", remove(scratch(preparedFile)), ""},
		{"masters' byte", flip(scratch(mastersFile), 0.7), over},
		{"masters deleted", remove(scratch(mastersFile)), over},
		{"scratch deleted", remove(scratch("")), ""},
		{"cube deleted", remove(cube), anew},
		{"cube cut", cut(cube, 0.5), anew},
		{"cube's byte", func(t *testing.T, dir string) {
			data, err := os.ReadFile(cube(dir))
			require.NoError(t, err)
			// Headers are written at the end: the first byte that is not zero is a row's.
			data[slices.IndexFunc(data, func(b byte) bool { return b != 0 })] ^= 1
			require.NoError(t, os.WriteFile(cube(dir), data, 0o644))
		}, anew},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := t.TempDir()
			require.NoError(t, os.CopyFS(dir, os.DirFS(left)))
			require.NoError(t, os.WriteFile(filepath.Join(dir, "stranger"), nil, 0o644))
			c.change(t, dir)
			var said []string
			_, err := Run(context.Background(), n.options(dir, 3, &said))
			require.NoError(t, err)
			n.requireWhole(t, dir, c.name)
			if c.said == "" {
				require.Empty(t, said)
				return
			}
			require.Len(t, said, 1)
			require.True(t, strings.HasPrefix(said[0], c.said), said[0])
			t.Log(said[0])
		})
	}
}

// Any change of what a run depends on starts it over.
func TestChangedInputsStartOver(t *testing.T) {
	n := newResumable(t, resumeCases()[0])
	var stop atomic.Bool
	left := t.TempDir()
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	o := n.options(left, 0, nil)
	o.Progress = func(stage string, done, _ int) {
		if stage == "strips" && done > 12 && stop.CompareAndSwap(false, true) {
			cancel()
		}
	}
	_, err := Run(ctx, o)
	require.ErrorIs(t, err, context.Canceled)
	frame := func(night, name string) string { return filepath.Join(night, name) }
	for _, c := range []struct {
		name   string
		change func(t *testing.T, n *resumable, o *Options)
		said   string
	}{
		{"frame touched", func(t *testing.T, n *resumable, _ *Options) {
			info, err := os.Stat(frame(n.night, "f00009.fits"))
			require.NoError(t, err)
			at := info.ModTime().Add(1)
			require.NoError(t, os.Chtimes(frame(n.night, "f00009.fits"), at, at))
		}, "the frame f00009.fits was changed"},
		{"frame rewritten", func(t *testing.T, n *resumable, _ *Options) {
			path := frame(n.night, "f00020.fits")
			info, err := os.Stat(path)
			require.NoError(t, err)
			data, err := os.ReadFile(path)
			require.NoError(t, err)
			data[5000] ^= 1
			require.NoError(t, os.WriteFile(path, data, 0o644))
			require.NoError(t, os.Chtimes(path, info.ModTime(), info.ModTime()))
		}, "the frame f00020.fits was changed"},
		{"frames gone", func(t *testing.T, n *resumable, _ *Options) {
			for _, name := range []string{"f00020.fits", "f00021.fits", "f00022.fits", "f00023.fits"} {
				require.NoError(t, os.Remove(frame(n.night, name)))
			}
		}, "4 frames were changed (f00020.fits, f00021.fits, f00022.fits and others)"},
		{"frame added", func(t *testing.T, n *resumable, _ *Options) {
			require.NoError(t, os.WriteFile(frame(n.night, "late.fits"), []byte("no frame"), 0o644))
		}, "the frame late.fits was changed"},
		{"recipe", func(t *testing.T, n *resumable, o *Options) {
			o.Recipe = writeRecipe(t, resumeCases()[0].recipe+"detector: {use: auto, hot_sigma: 9}\n")
		}, "the recipe was changed"},
		{"table", func(t *testing.T, n *resumable, o *Options) {
			require.NoError(t, os.WriteFile(o.Recipe.Stars.Use, []byte(starList+"B,123.3,21.6\n"), 0o644))
		}, "the file "},
		{"products", func(_ *testing.T, _ *resumable, o *Options) { o.Elements = false }, "other products are asked for"},
		{"labels", func(_ *testing.T, _ *resumable, o *Options) { o.AsLabelled = true }, "--as-labelled was changed"},
		{"cycles", func(_ *testing.T, _ *resumable, o *Options) { o.Cycles = []int{1} }, "other cycles are asked for"},
	} {
		t.Run(c.name, func(t *testing.T) {
			other := *n
			other.night = t.TempDir()
			// Links keep the times of the frames; one that is changed becomes a file of its own.
			names, err := filepath.Glob(filepath.Join(n.night, "*.fits"))
			require.NoError(t, err)
			for _, name := range names {
				copyFile(t, name, filepath.Join(other.night, filepath.Base(name)))
			}
			dir := t.TempDir()
			require.NoError(t, os.CopyFS(dir, os.DirFS(left)))
			fresh, said := t.TempDir(), []string{}
			o := other.options(dir, 1, &said)
			c.change(t, &other, &o)
			_, err = Run(context.Background(), o)
			require.NoError(t, err)
			require.Len(t, said, 1)
			require.Contains(t, said[0], "the unfinished run is started over: "+c.said)
			o.Out, said = fresh, nil
			_, err = Run(context.Background(), o)
			require.NoError(t, err)
			require.Empty(t, said)
			for _, name := range []string{product.CubeFile, product.LedgerFile} {
				want, err := os.ReadFile(filepath.Join(fresh, name))
				require.NoError(t, err)
				got, err := os.ReadFile(filepath.Join(dir, name))
				require.NoError(t, err)
				require.True(t, string(want) == string(got), name)
			}
		})
	}
}

// copyFile copies a file with its time.
func copyFile(t *testing.T, from, to string) {
	t.Helper()
	data, err := os.ReadFile(from)
	require.NoError(t, err)
	info, err := os.Stat(from)
	require.NoError(t, err)
	require.NoError(t, os.WriteFile(to, data, 0o644))
	require.NoError(t, os.Chtimes(to, info.ModTime(), info.ModTime()))
}

// Another version, another build of it, and a program that cannot tell, are not trusted.
func TestOtherProgramsAreNotTrusted(t *testing.T) {
	a := dependence{Version: "1", Program: "x"}
	for _, b := range []dependence{{Version: "2", Program: "x"}, {Version: "1", Program: "y"}} {
		require.Equal(t, "it was made by another build of the program", a.changed(&b))
	}
	require.Empty(t, a.changed(&dependence{Version: "1", Program: "x"}))
	none := dependence{Version: "1"}
	require.NotEmpty(t, none.changed(&none))
	require.Len(t, programDigest(), 64)
}
