package main

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// The night of trial.Lamps, its calibrations whole: made once a test run.
var (
	lampsOnce  sync.Once
	lampsDir   string
	lampsNight *trial.Night
	errLamps   error
)

// lamps is that night. It is shared: copy it before changing anything.
func lamps(t *testing.T) *trial.Night {
	t.Helper()
	lampsOnce.Do(func() {
		if lampsDir, errLamps = os.MkdirTemp("", "mirrorloom-lamps"); errLamps == nil {
			lampsNight, errLamps = rehearseLamps(lampsDir, nil)
		}
	})
	require.NoError(t, errLamps)
	return lampsNight
}

// rehearseLamps plans and rehearses the field in dir, changed first.
func rehearseLamps(dir string, change func(f *trial.Field)) (*trial.Night, error) {
	f, err := trial.Lamps()
	if err != nil {
		return nil, err
	}
	if change != nil {
		change(f)
	}
	n, err := f.Plan(context.Background(), dir)
	if err != nil {
		return nil, err
	}
	return n, n.Rehearse(context.Background(), trial.Noisy, rehearse.Options{Seed: 3, NoTruth: true})
}

// broken is a copy of the night for a test to break, and what it is reduced with.
type broken struct {
	*trial.Night
	t           *testing.T
	dir, recipe string
}

// path is the frame of a step, counted from 0.
func (b *broken) path(step int) string { return filepath.Join(b.dir, rehearse.FrameFile(step+1)) }

// each changes the frames of a kind: f sees the file's bytes and where pixels begin.
func (b *broken) each(kind sequence.Kind, f func(step int, file []byte, pixels int) []byte) {
	p := b.Seq.Profile.Detector
	raw := (p.Columns + 2*16) * p.Rows * 2
	raw = (raw + 2879) / 2880 * 2880
	for _, i := range b.Seq.StepsOf(kind) {
		file, err := os.ReadFile(b.path(i))
		require.NoError(b.t, err)
		if file = f(i, file, len(file)-raw); file == nil {
			require.NoError(b.t, os.Remove(b.path(i)))
			continue
		}
		require.NoError(b.t, os.WriteFile(b.path(i), file, 0o644))
	}
}

// remove takes away the frames of a kind that which names.
func (b *broken) remove(kind sequence.Kind, which func(step int) bool) {
	b.each(kind, func(step int, file []byte, _ int) []byte {
		if which(step) {
			return nil
		}
		return file
	})
}

// card replaces text on the card of a key in the frames of a kind.
func (b *broken) card(kind sequence.Kind, key, old, new string) {
	require.Equal(b.t, len(old), len(new))
	b.each(kind, func(_ int, file []byte, pixels int) []byte {
		at := bytes.Index(file[:pixels], []byte(fmt.Sprintf("%-8s= ", key)))
		require.GreaterOrEqual(b.t, at, 0)
		require.Contains(b.t, string(file[at:at+80]), old)
		copy(file[at:at+80], bytes.Replace(file[at:at+80], []byte(old), []byte(new), 1))
		return file
	})
}

// lightless puts the pixels of the first bias frame into the columns x0..x1-1 of the
// frames of a kind.
func (b *broken) lightless(kind sequence.Kind, x0, x1 int) {
	bias, err := os.ReadFile(b.path(b.Seq.StepsOf(sequence.Bias)[0]))
	require.NoError(b.t, err)
	p := b.Seq.Profile.Detector
	width := 2 * (p.Columns + 2*16)
	b.each(kind, func(_ int, file []byte, pixels int) []byte {
		from := bias[len(bias)-(len(file)-pixels):]
		for y := range p.Rows {
			copy(file[pixels+y*width+2*x0:pixels+y*width+2*x1], from[y*width+2*x0:y*width+2*x1])
		}
		return file
	})
}

// coded tells the steps that show a row of the code.
func (b *broken) coded(step int) bool {
	pattern, _ := b.Seq.Pattern(step)
	return pattern == sequence.PatternRow
}

// some counts calls and tells whether a call is among the first n of those that are
// wanted.
func some(n int, wanted func(step int) bool) func(step int) bool {
	return func(step int) bool {
		if !wanted(step) {
			return false
		}
		n--
		return n >= 0
	}
}

func every(int) bool { return true }

// Every calibration broken in turn: the exit code, one plain sentence, and the flags.
// What could not be calibrated is flagged on every voxel with data, and what could be is
// not.
func TestBrokenCalibrations(t *testing.T) {
	const nominal, low = product.FlagNominalWave, product.FlagLowFlat
	for _, c := range []struct {
		name     string
		breaks   func(b *broken)
		exit     int
		sentence string
		all      int16 // flags on every voxel with data
		part     int16 // flags on a fair part of them
		none     int16 // flags on none
	}{
		{"whole", func(*broken) {}, exitWhole, `^$`, 0, 0, nominal | low},
		{"arcs not planned", func(b *broken) {
			b.rehearse(func(f *trial.Field) { f.Target.Calibration.Arc = sequence.ArcFrames{Every: 1} })
		},
			exitDegraded, `wavelengths are the profile's, flagged NOMINALWAVE: there is no arc frame; plan arcs`, nominal, 0, low},
		{"arcs missing", func(b *broken) { b.remove(sequence.Arc, every) },
			exitDegraded, `flagged NOMINALWAVE: there is no arc frame`, nominal, 0, low},
		{"some arcs missing", func(b *broken) { b.remove(sequence.Arc, some(3, every)) }, exitWhole, `^$`, 0, 0, nominal | low},
		{"another lamp in the target", func(b *broken) { b.replan(func(f *trial.Field) { f.Target.Calibration.Arc.Lamp = "Kr" }) },
			exitDegraded, `flagged NOMINALWAVE: .*lamp`, nominal, 0, low},
		{"another lamp that glows", func(b *broken) { b.relight("HgKr") },
			exitDegraded, `flagged NOMINALWAVE: .*lamp`, nominal, 0, low},
		{"a lamp without a list", func(b *broken) { b.rename("Zz") },
			exitDegraded, `flagged NOMINALWAVE: .*no list has the lines of lamp "Zz"`, nominal, 0, low},
		{"arc lamp off", func(b *broken) { b.lightless(sequence.Arc, 0, 288) },
			exitDegraded, `flagged NOMINALWAVE: .*no line was seen`, nominal, 0, low},
		{"flat lamp off", func(b *broken) { b.lightless(sequence.Flat, 0, 288) },
			exitDegraded, `flat field is not corrected.* LOWFLAT.*too little light`, low, 0, 0},
		{"flats missing", func(b *broken) { b.remove(sequence.Flat, every) },
			exitDegraded, `flat field is not corrected.* LOWFLAT.*there is no coded lamp frame; plan or repeat`, low, 0, 0},
		{"flat cycle lacks two, restored", func(b *broken) { b.remove(sequence.Flat, some(2, b.coded)) },
			exitWhole, `^$`, 0, 0, nominal | low},
		{"flat cycle lacks two, no repairs", func(b *broken) {
			b.remove(sequence.Flat, some(2, b.coded))
			b.recipe = b.write("repair: {use: off}")
		},
			exitDegraded, `flat field is not corrected.* LOWFLAT.*61 of 63 coded lamp frames are there; repeat step [0-9]+, [0-9]+, or`, low, 0, nominal},
		{"flat cycle lacks most", func(b *broken) { b.remove(sequence.Flat, some(40, b.coded)) },
			exitDegraded, `flat field is not corrected.* LOWFLAT.*23 of 63 coded lamp frames`, low, 0, nominal},
		{"flats binned otherwise", func(b *broken) { b.card(sequence.Flat, "NAXIS1", "320", "160") },
			exitDegraded, `flat field is not corrected`, low, 0, 0},
		{"arcs binned otherwise", func(b *broken) { b.card(sequence.Arc, "NAXIS1", "320", "160") },
			exitDegraded, `flagged NOMINALWAVE: there is no arc frame`, nominal, 0, low},
		{"arcs of another instrument", func(b *broken) { b.card(sequence.Arc, "INSTRUME", "optical", "optikal") },
			exitDegraded, `flagged NOMINALWAVE: there is no arc frame`, nominal, 0, low},
		{"arcs of another run", func(b *broken) { b.recipe = b.write("arc: {use: elsewhere.fits}") },
			exitDegraded, `flagged NOMINALWAVE: .*elsewhere.fits`, nominal, 0, low},
		{"slit longer than the detector", func(b *broken) {
			b.rehearse(func(f *trial.Field) { f.Profile.DMD.Rows = 110 })
		}, exitDegraded, `trace is the profile's, and every voxel is flagged NOMINALWAVE: .*end`, nominal, 0, low},
		{"amplifier dead", func(b *broken) {
			for _, kind := range []sequence.Kind{sequence.Flat, sequence.Arc, sequence.Science, sequence.AllOff} {
				b.lightless(kind, 144, 288)
			}
		}, exitDegraded, `amplifier 2 shows no light of the lamp`, 0, low, nominal},
		{"amplifier dead in the flats", func(b *broken) { b.lightless(sequence.Flat, 0, 144) },
			exitDegraded, `amplifier 1 shows no light of the lamp`, 0, low, nominal},
		{"nothing asked for", func(b *broken) {
			b.remove(sequence.Arc, every)
			b.remove(sequence.Flat, every)
			b.recipe = "nominal"
		}, exitDegraded, `lamp frames with every mirror on are missing: dead pixels are not known`, 0, 0, nominal | low},
	} {
		t.Run(c.name, func(t *testing.T) {
			exit, sentence, cube := breakAndReduce(t, c.breaks)
			require.Equal(t, c.exit, exit, sentence)
			require.Regexp(t, c.sentence, sentence)
			n, flagged := 0, 0
			for i, v := range cube.Signal {
				if v == v {
					n++
					if cube.Flags[i]&c.part != 0 {
						flagged++
					}
					require.Equal(t, c.all, cube.Flags[i]&c.all, "voxel %d", i)
					require.Zero(t, cube.Flags[i]&c.none, "voxel %d", i)
				}
			}
			require.Greater(t, n, len(cube.Signal)/2, "voxels with data")
			if c.part != 0 {
				require.InDelta(t, 0.5, float64(flagged)/float64(n), 0.3, "part of the voxels that is flagged")
			}
		})
	}
}

// write makes a recipe and gives its path.
func (b *broken) write(text string) string {
	path := filepath.Join(b.t.TempDir(), "recipe.yaml")
	require.NoError(b.t, os.WriteFile(path, []byte(text+"\n"), 0o644))
	return path
}

// replan makes the sequence another one, of which the night is then taken to be.
func (b *broken) replan(change func(f *trial.Field)) {
	f, err := trial.Lamps()
	require.NoError(b.t, err)
	change(f)
	b.Night, err = f.Plan(context.Background(), b.t.TempDir())
	require.NoError(b.t, err)
}

// rename gives the arc lamp of the sequence a name that plan would refuse.
func (b *broken) rename(lamp string) {
	b.replan(func(*trial.Field) {})
	s := b.Night.Seq
	s.Target.Calibration.Arc.Lamp, s.TargetSHA = lamp, ""
	for _, i := range s.StepsOf(sequence.Arc) {
		s.Steps[i].Lamp = lamp
	}
	b.Night = &trial.Night{Dir: b.t.TempDir(), Field: b.Night.Field, Seq: s}
	require.NoError(b.t, os.MkdirAll(b.SequencePath(), 0o755))
	require.NoError(b.t, s.Write(context.Background(), b.SequencePath()))
}

// rehearse makes night and sequence others.
func (b *broken) rehearse(change func(f *trial.Field)) {
	n, err := rehearseLamps(b.t.TempDir(), change)
	require.NoError(b.t, err)
	b.Night, b.dir = n, n.Frames(trial.Noisy)
}

// relight exposes the arc frames to another lamp.
func (b *broken) relight(lamp string) {
	n, err := rehearseLamps(b.t.TempDir(), func(f *trial.Field) { f.Target.Calibration.Arc.Lamp = lamp })
	require.NoError(b.t, err)
	b.each(sequence.Arc, func(step int, file []byte, pixels int) []byte {
		other, err := os.ReadFile(filepath.Join(n.Frames(trial.Noisy), rehearse.FrameFile(step+1)))
		require.NoError(b.t, err)
		require.Len(b.t, other, len(file))
		return append(file[:pixels:pixels], other[pixels:]...)
	})
}

// breakAndReduce reduces a broken copy of the night with the command. Standard error is
// empty or one sentence.
func breakAndReduce(t *testing.T, breaks func(b *broken)) (exit int, sentence string, cube *trial.Cube) {
	t.Helper()
	n := lamps(t)
	b := &broken{Night: n, t: t, dir: t.TempDir(), recipe: "default"}
	require.NoError(t, os.CopyFS(b.dir, os.DirFS(n.Frames(trial.Noisy))))
	breaks(b)
	out := filepath.Join(t.TempDir(), "run")
	var stdout, stderr bytes.Buffer
	exit = run(context.Background(), []string{"reduce", b.dir, "--sequence", b.SequencePath(), "--recipe", b.recipe, "-o", out}, &stdout, &stderr)
	sentence = strings.TrimSuffix(stderr.String(), "\n")
	require.NotContains(t, sentence, "\n")
	if exit == exitError {
		require.NoDirExists(t, out)
		require.NoDirExists(t, out+".part")
		return exit, sentence, nil
	}
	cube, err := trial.ReadCube(filepath.Join(out, product.CubeFile))
	require.NoError(t, err)
	return exit, sentence, cube
}
