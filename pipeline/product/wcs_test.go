package product

import (
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

const (
	testN              = 5 // elements
	testElementMirrors = 3
	testRA, testDec    = 311.25, -43.5
)

// wcsSequence is as much of a sequence as a schema needs.
func wcsSequence(t testing.TB, profile string, rotang float64, parity int) *sequence.Sequence {
	t.Helper()
	p, err := instrument.Load(profile)
	require.NoError(t, err)
	p.DMD.Parity = parity
	p.Detector.Rows, p.Grid.Count = 6, 4 // keeps the files small
	s := &sequence.Sequence{Profile: p, Target: &sequence.Target{Name: "Field", RADeg: testRA, DecDeg: testDec, RotangDeg: rotang}}
	for j := range testN {
		s.Elements = append(s.Elements, sequence.Element{Column: j, Element: j, First: testElementMirrors * j, Last: testElementMirrors*(j+1) - 1})
	}
	return s
}

func smallSchema(t testing.TB, profile string, rotang float64, parity int) Schema {
	t.Helper()
	return NewSchema(wcsSequence(t, profile, rotang, parity))
}

// wcslib finds centre, directions and steps of the cube where the contract's
// words, which the script turns into numbers by itself, put them.
func TestCrosscheckWCS(t *testing.T) {
	dir := t.TempDir()
	var cases []map[string]any
	for _, profile := range []string{"optical", "infrared"} { // square, diagonal
		for _, parity := range []int{1, -1} {
			for _, rotang := range []float64{0, 37, -90, 200.5} {
				name := filepath.Join(dir, fmt.Sprintf("%s%+d%+g", profile, parity, rotang))
				s := wcsSequence(t, profile, rotang, parity)
				text, err := s.Profile.YAML()
				require.NoError(t, err)
				require.NoError(t, os.WriteFile(name+".yaml", text, 0o644))
				writeEmpty(t, name+".fits", NewSchema(s))
				cases = append(cases, map[string]any{
					"cube": name + ".fits", "profile": name + ".yaml", "element_mirrors": testElementMirrors,
					"n": testN, "ra": testRA, "dec": testDec, "rotang": rotang,
				})
			}
		}
	}
	text, err := json.Marshal(cases)
	require.NoError(t, err)
	list := filepath.Join(dir, "cases.json")
	require.NoError(t, os.WriteFile(list, text, 0o644))
	require.Equal(t, fmt.Sprintf("%d cubes\n", len(cases)), outside.Python(t, "product_wcs.py", list))
}
