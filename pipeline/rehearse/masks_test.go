package rehearse

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// A frame of a sky of one line alone counts the open mirrors: the masks of the
// sequence, with sentinel rows, rows closed for all and a patch closed for one
// element, expanded mirror by mirror by package sequence.
func TestFramesShowTheMasks(t *testing.T) {
	one := 7
	for _, name := range testProfiles() {
		p := smallProfile(t, name)
		p.Detector.DarkEPerS = 0
		target := smallTarget(p)
		first, last := p.WRange()
		middle := (first + last) / 2
		target.SentinelRows = []sequence.SentinelRow{{First: middle + 3, Last: middle + 4, Element: 2}, {First: middle - 6, Last: middle - 5, Element: 9}}
		target.Closed = []sequence.ClosedRow{{First: first, Last: first + 3}, {First: middle, Last: middle + 1}, {First: middle + 7, Last: middle + 9, Element: &one}}
		seq := planned(t, p, target)
		countMirrors(t, seq, p, nil)
	}
}

// Mirrors stuck on give their light in every step, stuck off in none.
func TestStuckMirrors(t *testing.T) {
	// Square: columns 12 to 35 are the elements'. One mirror of each state inside
	// and outside of the field.
	dir := t.TempDir()
	require.NoError(t, os.WriteFile(filepath.Join(dir, "stuck.csv"), []byte("column,row,state\n20,11,on\n21,11,off\n3,20,on\n4,20,off\n"), 0o666))
	p := smallProfile(t, "optical")
	p.Detector.DarkEPerS = 0
	p.DMD.StuckCSV = "stuck.csv"
	text, err := p.YAML()
	require.NoError(t, err)
	require.NoError(t, os.WriteFile(filepath.Join(dir, "p.yaml"), text, 0o666))
	p, err = instrument.Load(filepath.Join(dir, "p.yaml"))
	require.NoError(t, err)
	countMirrors(t, planned(t, p, smallTarget(p)), p, func(on []uint8, columns int) {
		on[11*columns+20], on[11*columns+21], on[20*columns+3], on[20*columns+4] = 1, 0, 1, 0
	})
}

// The truth is that of elements whose mirrors all move, however many do not: also where
// each frame is drawn anew.
func TestTruthIgnoresStuckMirrors(t *testing.T) {
	scene := &Scene{SeeingFWHMArcsec: 1, Sky: Sky{Lines: []SkyLine{{WavelengthNM: 580, FluxWM2Arcsec2: 1e-16}}}}
	for _, faults := range [][]Fault{nil, {{Name: Guide, Size: 0.1}}} {
		var truths [2][]float32
		var nights [2]float64
		for i := range truths {
			p := smallProfile(t, "optical")
			if i == 1 {
				require.NoError(t, p.SetStuck("stuck.csv", []instrument.StuckMirror{{Column: 20, Row: 11}, {Column: 23, Row: 14, On: true}}))
			}
			seq := planned(t, p, smallTarget(p))
			dir, _ := rehearsed(t, seq, scene, Options{Perfect: true, Noiseless: true, Faults: faults})
			truths[i], _, _, _ = truth(t, dir, "SIGNAL")
			nights[i] = sumOf(electrons(t, dir, seq, seq.StepsOf(sequence.Science)[0], 0)) + sumOf(electrons(t, dir, seq, seq.StepsOf(sequence.AllOff)[0], 0))
		}
		require.Equal(t, truths[0], truths[1])
		require.NotEqual(t, nights[0], nights[1])
	}
}

// countMirrors compares the light of every frame of the sky with the number of
// open mirrors; change is what the device does to a mask.
func countMirrors(t *testing.T, seq *sequence.Sequence, p *instrument.Profile, change func(on []uint8, columns int)) {
	scene := &Scene{SeeingFWHMArcsec: 1, Sky: Sky{Lines: []SkyLine{{WavelengthNM: p.Spectrograph.CenterNM, FluxWM2Arcsec2: 1e-16}}}}
	dir, _ := rehearsed(t, seq, scene, Options{Perfect: true, Noiseless: true, NoTruth: true})
	perMirror, columns := 0.0, p.DMD.Columns
	for _, k := range append(seq.StepsOf(sequence.Science), seq.StepsOf(sequence.AllOff)...) {
		mask := seq.Mask(k)
		if change != nil {
			change(mask.On, columns)
		}
		open := 0
		for _, on := range mask.On {
			open += int(on)
		}
		light := sumOf(electrons(t, dir, seq, k, 0))
		if perMirror == 0 {
			perMirror = light / float64(open)
			require.Greater(t, perMirror, 10.0)
		}
		require.InDelta(t, float64(open), light/perMirror, 0.01)
	}
}
