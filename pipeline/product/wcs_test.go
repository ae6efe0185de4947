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
	add := func(profile string, parity int, rotang float64, grid func(*instrument.Grid), frame SpectralFrame) {
		name := filepath.Join(dir, fmt.Sprint(len(cases)))
		s := wcsSequence(t, profile, rotang, parity)
		grid(&s.Profile.Grid)
		text, err := s.Profile.YAML()
		require.NoError(t, err)
		require.NoError(t, os.WriteFile(name+".yaml", text, 0o644))
		schema := NewSchema(s)
		schema.Frame = frame
		writeEmpty(t, name+".fits", schema)
		word := frame.Name
		if word == "" {
			word = Topocentric
		}
		vacuum := []float64{}
		for i := range s.Profile.Grid.Count {
			vacuum = append(vacuum, s.Profile.Grid.WavelengthNM(float64(i)))
		}
		cases = append(cases, map[string]any{
			"cube": name + ".fits", "profile": name + ".yaml", "element_mirrors": testElementMirrors,
			"n": testN, "ra": testRA, "dec": testDec, "rotang": rotang,
			"frame": word, "factor": frame.Factor, "vacuum_nm": vacuum,
		})
	}
	for _, profile := range []string{"optical", "infrared"} { // square, diagonal
		for _, parity := range []int{1, -1} {
			for _, rotang := range []float64{0, 37, -90, 200.5} {
				for _, axis := range []instrument.Axis{instrument.Vacuum, instrument.Air} {
					for _, spacing := range []instrument.Spacing{instrument.Linear, instrument.Logarithmic} {
						add(profile, parity, rotang, func(g *instrument.Grid) { g.Axis, g.Spacing = axis, spacing }, SpectralFrame{})
					}
				}
			}
		}
	}
	add("optical", 1, 12, func(*instrument.Grid) {}, SpectralFrame{Name: Barycentric, Factor: 1 - 26.4e-6})
	add("optical", 1, 12, func(g *instrument.Grid) { g.Axis, g.Spacing = instrument.Air, instrument.Logarithmic }, SpectralFrame{Name: Heliocentric, Factor: 1 + 98e-6})
	text, err := json.Marshal(cases)
	require.NoError(t, err)
	list := filepath.Join(dir, "cases.json")
	require.NoError(t, os.WriteFile(list, text, 0o644))
	require.Equal(t, fmt.Sprintf("%d cubes\n", len(cases)), outside.Python(t, "product_wcs.py", list))
}

// An observer who approaches the target (Factor above 1) has a negative VELOSYS, and
// sees wavelengths shorter by the factor.
func TestSpectralFrame(t *testing.T) {
	f := SpectralFrame{Name: Barycentric, Factor: 1.0001}
	require.InDelta(t, -29979.2458, f.VelocityMS(), 2)
	require.InDelta(t, 500, f.ObservedNM(500.05), 1e-12)
	for _, none := range []SpectralFrame{{}, {Name: Topocentric, Factor: 1}} {
		require.Zero(t, none.VelocityMS())
		require.Equal(t, 500.0, none.ObservedNM(500))
	}
}
