package pair

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// unlike lists the rows of a ledger that are not the plain "step i, frame i, ok,
// by STEP", as "step file verdict matched_by".
func unlike(l product.Ledger) []string {
	var rows []string
	for _, e := range l {
		plain := fmt.Sprintf("%d f%05d.fits ok keyword", e.Step, e.Step)
		if got := fmt.Sprintf("%d %s %s %s", e.Step, e.File, e.Verdict, e.MatchedBy); got != plain {
			rows = append(rows, strings.Join(strings.Fields(got), " "))
		}
	}
	return rows
}

// Every row states a night and, by hand from section "How frames find their
// steps" of the package's documentation, what the ledger must then say.
func TestVerdicts(t *testing.T) {
	type night struct {
		seq   *sequence.Sequence
		shots []*shot
	}
	at := func(n *night, step int) *shot { return n.shots[step-1] }
	without := func(n *night, keys ...string) {
		for _, f := range n.shots {
			for _, k := range keys {
				f.header.Delete(k)
			}
		}
	}
	drop := func(n *night, step int) { n.shots = append(n.shots[:step-1:step-1], n.shots[step:]...) }
	again := func(n *night, step int, name string) *shot {
		f := *at(n, step)
		f.name, f.header = name, f.header.Clone()
		n.shots = append(n.shots, &f)
		return &f
	}
	for _, c := range []struct {
		name string
		edit func(t *testing.T, n *night)
		want []string // the rows that are not plain
		note string   // part of the note of the first of them
	}{
		{"faultless", func(*testing.T, *night) {}, nil, ""},
		{"missing", func(_ *testing.T, n *night) { drop(n, 7) }, []string{"7 missing"}, ""},
		{"retaken", func(t *testing.T, n *night) {
			again(n, 7, "a.fits").set(t, "DATE-OBS", dateOf(60))
		}, []string{"7 a.fits ok keyword", "0 f00007.fits duplicate"}, ""},
		{"copied", func(_ *testing.T, n *night) { again(n, 7, "z.fits") },
			[]string{"0 z.fits duplicate"}, "step 7 is served by f00007.fits"},
		{"copied without times", func(_ *testing.T, n *night) { again(n, 7, "a.fits"); without(n, "DATE-OBS") },
			[]string{"7 a.fits ok keyword", "0 f00007.fits duplicate"}, ""},
		{"wrong mask", func(t *testing.T, n *night) { at(n, 7).set(t, "MASKID", n.seq.Steps[8].MaskID) },
			[]string{"7 f00007.fits wrong-mask keyword"}, "where step 7 shows"},
		{"wrong mask and a later good one", func(t *testing.T, n *night) {
			again(n, 7, "z.fits")
			at(n, 7).set(t, "MASKID", "0123456789abcdef")
		}, []string{"7 z.fits ok keyword", "0 f00007.fits wrong-mask"}, ""},
		{"mask in capitals", func(t *testing.T, n *night) { at(n, 7).set(t, "MASKID", strings.ToUpper(n.seq.Steps[6].MaskID)) }, nil, ""},
		{"wrong exposure", func(t *testing.T, n *night) { at(n, 7).set(t, "EXPTIME", 89.8) },
			[]string{"7 f00007.fits wrong-exposure keyword"}, "89.8 s where step 7 asks for 90 s"},
		{"exposure as the shutter measured it", func(t *testing.T, n *night) { at(n, 7).set(t, "EXPTIME", 90.07) }, nil, ""},
		{"wrong size", func(_ *testing.T, n *night) { at(n, 7).axes = []int{12, 5} },
			[]string{"7 f00007.fits wrong-size keyword"}, "12 x 5 pixels, not 12 x 6"},
		{"a cube", func(_ *testing.T, n *night) { at(n, 7).axes = []int{12, 6, 2} },
			[]string{"7 f00007.fits wrong-size keyword"}, "12 x 6 x 2"},
		{"a cube of one plane", func(_ *testing.T, n *night) { at(n, 7).axes = []int{12, 6, 1} }, nil, ""},
		{"unreadable", func(_ *testing.T, n *night) { at(n, 7).bytes = []byte("this is no FITS file") },
			[]string{"7 missing", "0 f00007.fits unreadable"}, ""},
		{"of no step", func(t *testing.T, n *night) { again(n, 7, "x.fits").set(t, "STEP", 14) },
			[]string{"0 x.fits extra"}, "STEP 14 is not among the sequence's steps, 1 to 13"},
		{"another kind", func(t *testing.T, n *night) { at(n, 4).set(t, "KIND", "dark") },
			[]string{"4 missing", "0 f00004.fits extra"}, ""},
		{"unknown kind", func(t *testing.T, n *night) { at(n, 4).set(t, "KIND", "LIGHT") },
			[]string{"4 missing", "0 f00004.fits extra"}, ""},
		{"one of another instrument", func(t *testing.T, n *night) { again(n, 7, "guest.fits").set(t, "INSTRUME", "other") },
			[]string{"0 guest.fits extra"}, `INSTRUME is "other", not "optical"`},
		{"STEP of no number", func(t *testing.T, n *night) { at(n, 7).set(t, "STEP", "seven") },
			[]string{"7 f00007.fits ok maskid"}, "STEP is not understood"},
		{"no STEP", func(_ *testing.T, n *night) { without(n, "STEP") }, byMask(), ""},
		{"no STEP, an all-off lost", func(_ *testing.T, n *night) { drop(n, stepOffA); without(n, "STEP") },
			replace(replace(byMask(), 4, "4 f00012.fits ok maskid"), 12, "12 missing"), ""},
		{"no STEP, an all-off too many", func(t *testing.T, n *night) {
			again(n, stepOffB, "x.fits").set(t, "DATE-OBS", dateOf(60))
			without(n, "STEP")
		}, append(replace(replace(byMask(), 4, "4 f00012.fits ok maskid"), 12, "12 x.fits ok maskid"), "0 f00004.fits duplicate"), ""},
		{"no STEP, one retaken", func(t *testing.T, n *night) {
			again(n, 7, "x.fits").set(t, "DATE-OBS", dateOf(60))
			without(n, "STEP")
		}, append(replace(byMask(), 7, "7 x.fits ok maskid"), "0 f00007.fits duplicate"), ""},
		{"no STEP, mask of no step", func(t *testing.T, n *night) {
			at(n, 7).set(t, "MASKID", "0123456789abcdef")
			without(n, "STEP")
		}, append(replace(byMask(), 7, "7 missing"), "0 f00007.fits extra"), ""},
		{"no STEP, exposed too briefly", func(t *testing.T, n *night) {
			at(n, 7).set(t, "EXPTIME", 9)
			without(n, "STEP")
		}, append(replace(byMask(), 7, "7 missing"), "0 f00007.fits wrong-exposure"), ""},
		{"no STEP in one frame, which fits a wrong one's step", func(t *testing.T, n *night) {
			again(n, 7, "x.fits").header.Delete("STEP")
			at(n, 7).set(t, "EXPTIME", 9)
		}, []string{"7 x.fits ok maskid", "0 f00007.fits wrong-exposure"}, ""},
		{"no STEP, and every step has a frame", func(_ *testing.T, n *night) { again(n, 7, "x.fits").header.Delete("STEP") },
			[]string{"0 x.fits duplicate"}, "every step that it fits has a frame with STEP"},
		{"no STEP nor MASKID", func(_ *testing.T, n *night) { without(n, "STEP", "MASKID") }, byTime(), "in the order of DATE-OBS"},
		{"no STEP nor MASKID, a bias lost", func(_ *testing.T, n *night) { drop(n, 2); without(n, "STEP", "MASKID") },
			replace(byTime(), 2, "2 missing"), ""},
		{"no STEP, MASKID nor KIND in one frame", func(_ *testing.T, n *night) {
			for _, k := range []string{"STEP", "MASKID", "KIND"} {
				at(n, 7).header.Delete(k)
			}
		}, []string{"7 missing", "0 f00007.fits extra"}, ""},
		{"some frames with cards that others lack", func(_ *testing.T, n *night) {
			for _, f := range n.shots[firstScience-1 : firstScience+1] {
				f.header.Delete("STEP")
			}
			at(n, firstScience).header.Delete("MASKID")
		}, []string{"5 missing", "6 missing", "0 f00005.fits extra", "0 f00006.fits extra"}, ""},
		{"no MASKID, EXPTIME nor INSTRUME", func(_ *testing.T, n *night) { without(n, "MASKID", "EXPTIME", "INSTRUME") }, nil, ""},
		{"keywords and kinds by the profile", func(_ *testing.T, n *night) {
			n.seq.Profile.Keywords.Step, n.seq.Profile.Keywords.Kind = "SEQNO", "IMAGETYP"
			n.seq.Profile.Keywords.DateObs, n.seq.Profile.Keywords.MaskID = "UT", "PATTERN"
			n.seq.Profile.Keywords.Exptime, n.seq.Profile.Keywords.Instrume = "ITIME", "CAMERA"
			n.seq.Profile.Kinds.Science = "object"
			n.shots = takeNight(n.seq)
		}, nil, ""},
		{"packed", func(_ *testing.T, n *night) {
			for _, f := range n.shots {
				f.packed, f.name = true, f.name+".gz"
			}
		}, packed(), ""},
		{"in an extension", func(_ *testing.T, n *night) {
			for _, f := range n.shots {
				f.extension = true
			}
		}, nil, ""},
		{"in an extension, cards in the primary header", func(_ *testing.T, n *night) {
			for _, f := range n.shots {
				f.extension, f.primary, f.header = true, f.header, fitsutil.NewHeader()
			}
		}, nil, ""},
		{"the image's own cards count first", func(_ *testing.T, n *night) {
			for _, f := range n.shots {
				f.extension, f.primary = true, fitsutil.NewHeader(fitsutil.Card{Key: "STEP", Value: int64(1)})
			}
		}, nil, ""},
		{"control characters in a name", func(_ *testing.T, n *night) { again(n, 7, "f\n7.fits") },
			[]string{`0 "f\n7.fits" unreadable`}, "rename"},
	} {
		t.Run(c.name, func(t *testing.T) {
			seq := smallSequence(t)
			n := &night{seq, takeNight(seq)}
			c.edit(t, n)
			got, err := Run(t.Context(), n.seq, Options{Night: writeNight(t, n.shots), ScratchDir: t.TempDir()}, nil)
			require.NoError(t, err)
			require.Equal(t, c.want, unlike(got.Ledger))
			checkNight(t, seq, got)
			if c.note != "" {
				require.Contains(t, firstUnlike(got.Ledger).Note, c.note)
			}
		})
	}
}

// byMask is what a night without STEP gives: every frame by its mask.
func byMask() []string { return matched("f%05d.fits", "maskid") }

func byTime() []string { return matched("f%05d.fits", "time") }

func packed() []string { return matched("f%05d.fits.gz", "keyword") }

func matched(file, by string) []string {
	var rows []string
	for step := 1; step <= allSteps; step++ {
		rows = append(rows, fmt.Sprintf("%d %s ok %s", step, fmt.Sprintf(file, step), by))
	}
	return rows
}

func replace(rows []string, step int, with string) []string {
	rows[step-1] = with
	return rows
}

func firstUnlike(l product.Ledger) product.Entry {
	for _, e := range l {
		if len(unlike(product.Ledger{e})) > 0 {
			return e
		}
	}
	return product.Entry{}
}

// checkNight holds what is true of every paired night.
func checkNight(t *testing.T, seq *sequence.Sequence, n *Night) {
	t.Helper()
	used := 0
	seen := map[string]bool{}
	for i, e := range n.Ledger {
		if i < len(seq.Steps) {
			require.Equal(t, seq.Steps[i].Step, e.Step)
		} else {
			require.Zero(t, e.Step)
			require.False(t, e.Verdict.Used())
			require.NotEmpty(t, e.Note, e.File)
		}
		require.Contains(t, product.Verdicts(), e.Verdict)
		if e.Verdict == product.Missing {
			require.Empty(t, e.File)
			continue
		}
		require.False(t, seen[e.File], "%s has two rows", e.File)
		seen[e.File] = true
		if e.Verdict.Used() {
			f := n.Frames[used]
			require.Equal(t, i, f.StepIndex)
			require.Equal(t, e.File, filepath.Base(f.Path))
			require.Equal(t, seq.Steps[i].Kind, f.Kind)
			used++
		}
	}
	require.Len(t, n.Frames, used)
}

// A frame given is one that opens, with the image, time and airmass that were
// written.
func TestFramesOpen(t *testing.T) {
	seq := smallSequence(t)
	shots := takeNight(seq)
	shots[2].packed, shots[2].extension, shots[2].name = true, true, "f3.fits.gz"
	scratch := t.TempDir()
	n, err := Run(t.Context(), seq, Options{Night: writeNight(t, shots)}, nil)
	require.NoError(t, err)
	require.Len(t, n.Frames, allSteps)
	require.Len(t, n.Of(sequence.Science), 7)
	for i, f := range n.Frames {
		require.Equal(t, time.Date(2031, 3, 14, 2, 30+i, 0, 0, time.UTC), f.Start)
		require.Equal(t, 1.25, f.Airmass)
		file, im, err := f.Open(scratch)
		require.NoError(t, err)
		require.Equal(t, []int{12, 6}, im.Axes)
		require.NoError(t, file.Close())
	}
	require.Equal(t, 1, n.Frames[2].HDU)
	left, err := os.ReadDir(scratch)
	require.NoError(t, err)
	require.Empty(t, left)
}

// The result does not hang on the number of workers, and progress counts up.
func TestWorkers(t *testing.T) {
	seq := smallSequence(t)
	shots := takeNight(seq)
	for _, f := range shots {
		f.header.Delete("STEP")
	}
	dir := writeNight(t, shots)
	var first *Night
	for _, workers := range []int{1, 2, 7, 100} {
		var seen []int
		n, err := Run(t.Context(), seq, Options{Night: dir, Workers: workers}, func(done, total int) {
			require.Equal(t, allSteps, total)
			seen = append(seen, done)
		})
		require.NoError(t, err)
		require.Len(t, seen, allSteps)
		require.IsIncreasing(t, seen)
		if first == nil {
			first = n
		}
		require.Equal(t, fmt.Sprint(first), fmt.Sprint(n)) // as text: NaN equals NaN
	}
}

func TestCancelled(t *testing.T) {
	seq := smallSequence(t)
	ctx, cancel := context.WithCancel(t.Context())
	n, err := Run(ctx, seq, Options{Night: writeNight(t, takeNight(seq)), Workers: 2}, func(done, _ int) {
		if done == 2 {
			cancel()
		}
	})
	require.ErrorIs(t, err, context.Canceled)
	require.Nil(t, n)
}
