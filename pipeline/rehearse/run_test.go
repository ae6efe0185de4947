package rehearse

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"sort"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/sequence"
)

// contents reads every file of a folder by its path in it.
func contents(t *testing.T, dir string) map[string][]byte {
	files := map[string][]byte{}
	require.NoError(t, filepath.Walk(dir, func(path string, info os.FileInfo, err error) error {
		if err != nil || info.IsDir() {
			return err
		}
		data, err := os.ReadFile(path)
		name, _ := filepath.Rel(dir, path)
		files[name] = data
		return err
	}))
	return files
}

func sameFiles(t *testing.T, want, got map[string][]byte, what string) {
	require.Len(t, got, len(want), what)
	for name, data := range want {
		require.True(t, bytes.Equal(data, got[name]), "%s: %s differs", what, name)
	}
}

// Everything that can go wrong at once, so that the comparison covers all paths.
func allFaults(names ...string) []Fault {
	sizes := map[string]float64{
		Drift: 0.05, Trend: 0.3, Colour: 0.1, SkyLines: 0.2, Offset: 5, Leak: 0.002, Cosmic: 2, Lost: 2, Mislabel: 2,
		Seeing: 0.1, Guide: 0.1, Shift: 0.1, Persist: 0.01, Neighbour: 0.01, Stale: 1, Flip: 2, Invert: 1,
	}
	var list []Fault
	for _, name := range names {
		list = append(list, Fault{name, sizes[name]})
	}
	return list
}

func TestSameBytesWhateverTheWorkers(t *testing.T) {
	for _, name := range testProfiles() {
		p := smallProfile(t, name)
		target := smallTarget(p)
		target.SentinelRows = []sequence.SentinelRow{{First: 25, Last: 27, Element: 3}}
		if name == "infrared" {
			target.SentinelRows = []sequence.SentinelRow{{First: -9, Last: -4, Element: 3}}
		}
		seq := planned(t, p, target)
		scene := smallScene(p.Spectrograph.CenterNM)
		plain := []string{Drift, Trend, Colour, SkyLines, Offset, Leak, Cosmic, Lost, Mislabel, Persist, Neighbour, Stale, Flip, Invert}
		nights := [][]Fault{nil, allFaults(plain...), allFaults(FaultNames()...)}
		if name == "infrared" {
			nights = nights[1:2]
		}
		for _, faults := range nights {
			first, _ := rehearsed(t, seq, scene, Options{Seed: 3, Faults: faults, Workers: 1})
			want := contents(t, first)
			for _, workers := range []int{2, 5} {
				// A small memory makes strips of the fewest rows.
				dir, _ := rehearsed(t, seq, scene, Options{Seed: 3, Faults: faults, Workers: workers, MemoryBytes: int64(workers-1) << 20})
				sameFiles(t, want, contents(t, dir), name)
			}
		}
	}
}

func TestAnotherSeed(t *testing.T) {
	p := smallProfile(t, "optical")
	seq := planned(t, p, smallTarget(p))
	scene := smallScene(p.Spectrograph.CenterNM)
	a, _ := rehearsed(t, seq, scene, Options{Seed: 1, Perfect: true})
	b, _ := rehearsed(t, seq, scene, Options{Seed: 2, Perfect: true})
	one, other := contents(t, a), contents(t, b)
	for name := range one {
		switch filepath.Base(name) {
		case TruthFile, GeometryFile, SceneFile:
			require.True(t, bytes.Equal(one[name], other[name]), name)
		default:
			require.False(t, bytes.Equal(one[name], other[name]), name)
		}
	}
	// Not perfect, another seed is another instrument.
	c, _ := rehearsed(t, seq, scene, Options{Seed: 2})
	require.NotEqual(t, one[filepath.Join(TruthFolder, GeometryFile)], contents(t, c)[filepath.Join(TruthFolder, GeometryFile)])
}

func TestFitsverify(t *testing.T) {
	p := smallProfile(t, "optical")
	seq := planned(t, p, smallTarget(p))
	for _, noiseless := range []bool{false, true} {
		dir, summary := rehearsed(t, seq, smallScene(p.Spectrograph.CenterNM), Options{Seed: 1, Noiseless: noiseless})
		require.Equal(t, len(seq.Steps), summary.Frames)
		files, err := filepath.Glob(filepath.Join(dir, "*.fits"))
		require.NoError(t, err)
		require.Len(t, files, len(seq.Steps))
		sort.Strings(files)
		outside.Program(t, "fitsverify", append(files, filepath.Join(dir, TruthFolder, TruthFile))...)
		entries, err := os.ReadDir(dir)
		require.NoError(t, err)
		require.Len(t, entries, len(files)+1, "frames and truth, nothing else")
	}
}

func TestCancelled(t *testing.T) {
	p := smallProfile(t, "optical")
	seq := planned(t, p, smallTarget(p))
	ctx, cancel := context.WithCancel(context.Background())
	_, err := Run(ctx, seq, smallScene(580), Options{}, t.TempDir(), func(done, total int) { cancel() })
	require.ErrorIs(t, err, context.Canceled)
}

func TestProgressReachesTheEnd(t *testing.T) {
	p := smallProfile(t, "optical")
	seq := planned(t, p, smallTarget(p))
	last, all := 0, -1
	_, err := Run(context.Background(), seq, smallScene(580), Options{NoTruth: true}, t.TempDir(), func(done, total int) {
		require.Greater(t, done, last)
		last, all = done, total
	})
	require.NoError(t, err)
	require.Equal(t, all, last)
}

func TestRefusals(t *testing.T) {
	p := smallProfile(t, "optical")
	seq := planned(t, p, smallTarget(p))
	scene := smallScene(580)
	lamp := planned(t, p, smallTarget(p)) // plan itself refuses such a lamp
	for i := range lamp.Steps {
		if lamp.Steps[i].Kind == sequence.Arc {
			lamp.Steps[i].Lamp = "Krypton"
		}
	}
	dark := smallTarget(p)
	dark.Calibration.Arc.Lamp = "Ar"
	bad := *scene
	bad.SeeingFWHMArcsec = 0
	for _, c := range []struct {
		seq   *sequence.Sequence
		scene *Scene
		opts  Options
		want  string
	}{
		{seq, scene, Options{Workers: -1}, "workers: -1 is no number of workers; give 1 or more"},
		{seq, scene, Options{MemoryBytes: 5}, "memory: 5 bytes are too few; give 1 MiB or more"},
		{seq, scene, Options{Faults: []Fault{{"lost", 16}}}, "fault lost=16: the sequence has 15 science frames that it can befall; give a smaller number"},
		{seq, scene, Options{Faults: []Fault{{"stale", 15}}}, "fault stale=15: the sequence has 14 science frames that it can befall; give a smaller number"},
		{seq, scene, Options{Faults: []Fault{{"drift", 0.1}, {"drift", 0.2}}}, "fault drift is given twice; give it once"},
		{seq, &bad, Options{}, "scene: seeing_fwhm_arcsec: 0 is not above 0; give a positive number"},
		{lamp, scene, Options{}, `lamp "Krypton" is unknown; name one of continuum, halogen, or elements of the list like Ne or NeAr`},
		{planned(t, p, dark), scene, Options{}, `lamp "Ar" has no line in the band of profile optical; choose another lamp`},
	} {
		_, err := Run(context.Background(), c.seq, c.scene, c.opts, t.TempDir(), nil)
		require.EqualError(t, err, c.want)
	}
}

// faultsOf reads faults.json.
func faultsOf(t *testing.T, dir string) FaultsTruth {
	data, err := os.ReadFile(filepath.Join(dir, TruthFolder, FaultsFile))
	require.NoError(t, err)
	var f FaultsTruth
	require.NoError(t, json.Unmarshal(data, &f))
	return f
}
