package reduce

import (
	"context"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync/atomic"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

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
