package report

import (
	"fmt"
	"math"
	"math/rand/v2"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// scene is the invented field of a synthetic RUN folder: a star a given distance
// to the north-east of the centre, a fainter one to the south, a nebula of one
// line, sky, noise; voxels off the detector at the corners of the wavelength
// axis; a closed row.
type scene struct {
	elements, rows, planes int
	rotang                 float64
	parity                 int
	object                 string
}

const (
	starEast, starNorth = 5.0, 4.0 // arc seconds
	closedRow           = 3
	sceneLine           = 0.4 // of the wavelength axis
)

func smallScene() scene { return scene{elements: 40, rows: 60, planes: 50, parity: 1, object: "Field"} }

func (sc scene) schema(t testing.TB) product.Schema {
	t.Helper()
	p, err := instrument.Load("optical")
	require.NoError(t, err)
	p.DMD.Parity = sc.parity
	p.Detector.Rows, p.Spectrograph.YCenterPx = sc.rows, float64(sc.rows-1)/2
	p.Grid = instrument.Grid{FirstNM: 480, StepNM: 200 / float64(sc.planes), Count: sc.planes}
	s := &sequence.Sequence{Profile: p, Target: &sequence.Target{Name: sc.object, RADeg: 123.3, DecDeg: 21.6, RotangDeg: sc.rotang}}
	for j := range sc.elements {
		s.Elements = append(s.Elements, sequence.Element{Column: j, Element: j, First: 2 * j, Last: 2*j + 1})
	}
	return product.NewSchema(s)
}

// onSky gives a voxel's offset on the sky by the words of the contract: +axis 2 at
// position angle t, east towards -axis 1 at t = 0 unless the parity is -1.
func (sc scene) onSky(s product.Schema, j, y int) (east, north float64) {
	x := (float64(j) - float64(sc.elements-1)/2) * s.C1Deg * 3600
	up := (float64(y) - float64(sc.rows-1)/2) * s.C2Deg * 3600
	along2, along1 := sc.rotang*math.Pi/180, (sc.rotang-90*float64(sc.parity))*math.Pi/180
	return x*math.Sin(along1) + up*math.Sin(along2), x*math.Cos(along1) + up*math.Cos(along2)
}

// light is the noiseless signal of a voxel, electrons.
func (sc scene) light(s product.Schema, j, y, l int) float64 {
	east, north := sc.onSky(s, j, y)
	blob := func(e, n, width float64) float64 {
		return math.Exp(-((east-e)*(east-e) + (north-n)*(north-n)) / (2 * width * width))
	}
	at := float64(l) / float64(sc.planes)
	line := math.Exp(-math.Pow((at-sceneLine)*float64(sc.planes)/1.6, 2))
	ring := math.Exp(-math.Pow(math.Hypot(east+4, north)-7, 2) / 4)
	return 12 + 4000*blob(starEast, starNorth, 0.9)*(1.2-at) + 700*blob(-3, -11, 0.9) + 900*line*ring + 40*line
}

// write fills a folder as reduce does and gives the page's input.
func (sc scene) write(t testing.TB, dir string) Input {
	t.Helper()
	s := sc.schema(t)
	primary, err := product.Provenance{ProfileName: "optical"}.Primary("Field")
	require.NoError(t, err)
	specs, err := s.Images()
	require.NoError(t, err)
	cube, err := fitsutil.CreateCube(filepath.Join(dir, product.CubeFile), primary, specs)
	require.NoError(t, err)
	defer cube.Abort() // nothing after Commit
	random := rand.New(rand.NewPCG(1, 2))
	n := sc.elements * sc.rows
	signal, variance, flags, scale := make([]float32, n), make([]float32, n), make([]int16, n), make([]float32, n)
	for l := range sc.planes {
		for i := range n {
			sc.voxel(s, random, i, l, &signal[i], &variance[i], &flags[i])
			scale[i] = 1
		}
		for hdu, data := range []any{signal, variance, flags, scale} {
			require.NoError(t, cube.WriteStrip(hdu, 0, sc.rows, l, 1, data))
		}
	}
	require.NoError(t, cube.Commit())
	return sc.input(s)
}

func (sc scene) voxel(s product.Schema, random *rand.Rand, i, l int, signal, variance *float32, flags *int16) {
	j, y := i%sc.elements, i/sc.elements
	f := sc.light(s, j, y, l)
	v := f + 90
	*signal, *variance, *flags = float32(f+random.NormFloat64()*math.Sqrt(v)), float32(v), 0
	switch {
	case y == closedRow, l < j*sc.planes/(10*sc.elements):
		*signal, *variance, *flags = float32(math.NaN()), float32(math.NaN()), product.FlagNoData
	case (j*31+y*17+l*7)%997 == 0:
		*flags = product.FlagBadPixel
	}
}

// input is a run of three kinds of steps with a frame lost and one too many.
func (sc scene) input(s product.Schema) Input {
	var l product.Ledger
	add := func(kind string, exptime float64) *product.Entry {
		e := product.NewEntry(len(l) + 1)
		e.File, e.Kind, e.MaskID, e.MatchedBy = fmt.Sprintf("f%05d.fits", e.Step), kind, "0123456789abcdef", product.ByKeyword
		e.DateObs, e.ExptimeS, e.Verdict = fmt.Sprintf("2031-03-14T02:%02d:00.000", len(l)), exptime, product.OK
		l = append(l, e)
		return &l[len(l)-1]
	}
	for range 3 {
		add("bias", 0)
	}
	for range 15 {
		add("science", 90).SaturatedFraction = 0.0001
	}
	lost := add("science", 90)
	*lost = product.NewEntry(lost.Step)
	lost.Kind, lost.Verdict = "science", product.Missing
	stray := add("science", 90)
	stray.Step, stray.Verdict, stray.MatchedBy, stray.Note = 0, product.Duplicate, "", "step 7 is served by f00007.fits"
	chi2 := 1.013
	why := "1 science frame is missing and was not restored (step 19)"
	return Input{
		Run: &product.Run{
			Schema: product.RunSchema, Version: "0.1.0", CPULevel: "amd64 pure Go", Exit: 3,
			Inputs: []product.Input{{File: "sequence.fits", SHA256: "3b1c1c0e6a3f0d6dd1b0a7ad9b8a6f5d4c3b2a19087f6e5d4c3b2a1908f7e6d5"}},
			Settings: map[string]any{"memory_bytes": 536870912, "workers": 2, "night": "night", "cube": true,
				"recipe": map[string]any{"name": "default", "arc": map[string]any{"use": "off"}}},
			Quality: product.Quality{
				GoodFraction: 0.9412, CoveredGoodFraction: 0.99973, DarkChi2Heldout: &chi2, Lost: 1, RestoredGrowth: at(2.04), BadPixels: 214,
				ErrorScale:    &product.ErrorScale{Mean: 1.1, Max: 7, Applied: 0.02, Map: [][]*float64{{at(1), nil}, {at(3), at(7)}}},
				DarkChi2Steps: []product.StepChi2{{Step: 4, Chi2: at(1.02)}, {Step: 5}, {Step: 6, Chi2: at(31)}},
				DarkPulls:     &product.DarkPulls{FirstSigma: -2, StepSigma: 1, Counts: []int{20, 330, 340, 19}},
			},
			Calibration: &product.Calibration{Arcs: &product.Arcs{
				Lines: 300, RMSPx: 0.01, WorstErrorPx: 0.02,
				ByPlace: []product.ArcPlace{{Element: 0, LastRow: 20, Residual: product.Residual{MeanPx: 0.01, RMSPx: 0.02, Number: 9}}, {Element: 39, FirstRow: 21, LastRow: 59, Residual: product.Residual{MeanPx: -0.02, RMSPx: 0.03, Number: 8}}},
				ByLine:  []product.ArcLine{{WavelengthNM: 500, Residual: product.Residual{MeanPx: 0.002, RMSPx: 0.01, Number: 7}}, {WavelengthNM: 640, Residual: product.Residual{MeanPx: -0.004, RMSPx: 0.02, Number: 10}}},
			}},
			Throughput: &product.Throughput{State: product.ThroughputCorrected, Verdict: "it varied", HeldOut: []product.HeldOutStep{{Step: "throughput by dark columns", Before: 40, After: 1.02, Kept: true}}},
			Warnings:   []string{why, "1 frame is a duplicate and was not used: see the ledger"},
			Stages: []product.Stage{{Name: "pair", Seconds: 0.12}, {Name: "prepare", Seconds: 1.31, Bytes: 3.1e8},
				{Name: "strips", Seconds: 3.92, Bytes: 4.24e9}},
		},
		Ledger: l, Schema: s, Profile: "optical", Degraded: []string{why},
		Throughput: []Curve{
			{Method: "together", Minutes: []float64{0, 1, 2}, C: []float64{1.01, 0.97, 1.02}, Err: []float64{0.01, 0.02, math.Inf(1)}},
			{Method: "dark columns", Minutes: []float64{0, 1}, C: []float64{1.02, 0.96}, Err: []float64{0.02, 0.02}},
		},
	}
}
