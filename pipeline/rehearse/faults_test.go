package rehearse

import (
	"context"
	"math"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// faultSequence is a small sequence with two frames of the sky through all
// elements behind the others.
func faultSequence(t *testing.T, p *instrument.Profile, family string, v, dark int) *sequence.Sequence {
	target := smallTarget(p)
	target.Code.Family, target.Code.V, target.Code.Dark = family, &v, &dark
	target.Calibration.Flat.CodedCycles = 0
	seq, _, err := plan.Build(context.Background(), target, p)
	require.NoError(t, err)
	all := make([]uint8, seq.V)
	for i := range all {
		all[i] = 1
	}
	for range 2 {
		seq.Steps = append(seq.Steps, sequence.Step{Step: len(seq.Steps) + 1, Kind: sequence.AllOn, ExptimeSeconds: 60, Row: -1})
		seq.Code = append(seq.Code, all)
	}
	require.NoError(t, seq.Write(context.Background(), filepath.Join(t.TempDir(), "seq")))
	return seq
}

// pairOf rehearses a clean night and one with faults, both noiseless and
// perfect.
func pairOf(t *testing.T, seq *sequence.Sequence, scene *Scene, faults ...Fault) (clean, faulty string, f FaultsTruth) {
	opts := Options{Seed: 5, Perfect: true, Noiseless: true, NoTruth: true}
	clean, _ = rehearsed(t, seq, scene, opts)
	opts.Faults = faults
	faulty, _ = rehearsed(t, seq, scene, opts)
	return clean, faulty, faultsOf(t, faulty)
}

func sumOf(image [][]float64) float64 {
	sum := 0.0
	for _, row := range image {
		for _, e := range row {
			sum += e
		}
	}
	return sum
}

func smallDark(t *testing.T) *instrument.Profile {
	p := smallProfile(t, "optical")
	p.Detector.DarkEPerS = 0
	return p
}

// skySteps are the frames of the sky with light.
func skySteps(seq *sequence.Sequence) []int {
	return append(seq.StepsOf(sequence.Science), seq.StepsOf(sequence.AllOn)...)
}

// A frame's light is c times that of the clean night, in science and all-on
// frames, and lamps do not drift.
func TestFaultDriftAndTrend(t *testing.T) {
	seq := faultSequence(t, smallDark(t), "m-sequence", 15, 3)
	clean, faulty, truth := pairOf(t, seq, smallScene(580), Fault{Drift, 0.05}, Fault{Trend, 0.3})
	for _, k := range skySteps(seq) {
		got := sumOf(electrons(t, faulty, seq, k, 0)) / sumOf(electrons(t, clean, seq, k, 0))
		require.InDelta(t, truth.Frames[k].Throughput, got, 1e-5)
		require.NotEqual(t, 1.0, truth.Frames[k].Throughput)
	}
	flat := seq.StepsOf(sequence.Flat)[0]
	require.Equal(t, electrons(t, clean, seq, flat, 0), electrons(t, faulty, seq, flat, 0))
}

// Through one element, the light's slope against the clean night's, over the
// grid, is that asked for.
func TestFaultColour(t *testing.T) {
	p := smallDark(t)
	seq := faultSequence(t, p, "slit-scan", 12, 0)
	scene := &Scene{SeeingFWHMArcsec: 1, Sky: Sky{ContinuumABArcsec2: ptr(17)}}
	clean, faulty, truth := pairOf(t, seq, scene, Fault{Colour, 0.1})
	g := nominalGeometry(seq)
	largest := 0.0
	for _, k := range seq.StepsOf(sequence.Science) {
		a, b := electrons(t, clean, seq, k, 0), electrons(t, faulty, seq, k, 0)
		y := 28
		at := func(nm float64) int {
			e := seq.Elements[seq.ElementColumns()[openElement(seq, k)]]
			return int(math.Round(g.land(g.across(float64(e.First+e.Last)/2), g.dispersed(nm), float64(y))))
		}
		low, high := at(565), at(595)
		// 30 of the grid's 45 nm.
		slope := (b[y][high]/a[y][high] - b[y][low]/a[y][low]) * 45 / 30
		require.InDelta(t, truth.Frames[k].Colour, slope, 0.01*0.1+0.02*math.Abs(truth.Frames[k].Colour))
		largest = math.Max(largest, math.Abs(slope))
	}
	require.Greater(t, largest, 0.05)
}

// What a night with only the sky's lines has, times the factor, is what a night
// with the fault has more.
func TestFaultSky(t *testing.T) {
	seq := faultSequence(t, smallDark(t), "m-sequence", 15, 3)
	scene := smallScene(580)
	clean, faulty, truth := pairOf(t, seq, scene, Fault{SkyLines, 0.2})
	lines, _ := rehearsed(t, seq, &Scene{SeeingFWHMArcsec: 1, Sky: Sky{Lines: scene.Sky.Lines}}, Options{Perfect: true, Noiseless: true, NoTruth: true})
	for _, k := range skySteps(seq) {
		more := sumOf(electrons(t, faulty, seq, k, 0)) - sumOf(electrons(t, clean, seq, k, 0))
		require.InDelta(t, truth.Frames[k].SkyLines, more/sumOf(electrons(t, lines, seq, k, 0)), 1e-4)
	}
}

// A frame's level moves by the offset, overscan included.
func TestFaultOffset(t *testing.T) {
	p := smallDark(t)
	seq := faultSequence(t, p, "m-sequence", 15, 3)
	clean, faulty, truth := pairOf(t, seq, smallScene(580), Fault{Offset, 20})
	for k := range seq.Steps {
		a, columns, _ := frame(t, clean, k)
		b, _, _ := frame(t, faulty, k)
		for i := range a {
			gain := p.Detector.Amplifiers[0].GainEPerADU
			if x := i % columns; x >= 80 && x < 160 || x >= 176 {
				gain = p.Detector.Amplifiers[1].GainEPerADU
			}
			require.InDelta(t, truth.Frames[k].OffsetE, float64(b[i]-a[i])*gain, 0.01)
		}
	}
}

// An all-off frame holds what every element leaks of its own light, with the
// structure; a larger device leaks light from outside the field too.
func TestFaultLeak(t *testing.T) {
	p := smallDark(t)
	p.DMD.Columns = 24 // no mirror outside the 12 elements
	seq := faultSequence(t, p, "slit-scan", 12, 0)
	scene := smallScene(580)
	clean, faulty, _ := pairOf(t, seq, scene, Fault{Leak, 0.01})
	r, err := newRehearsal(seq, scene, Options{Seed: 5, Perfect: true, Noiseless: true, Faults: []Fault{{Leak, 0.01}}, Workers: 1, MemoryBytes: 1 << 25})
	require.NoError(t, err)
	off := electrons(t, faulty, seq, seq.StepsOf(sequence.AllOff)[0], 0)
	want := make([][]float64, len(off))
	for y := range want {
		want[y] = make([]float64, len(off[0]))
	}
	for _, k := range seq.StepsOf(sequence.Science) {
		j := openElement(seq, k)
		for y, row := range electrons(t, clean, seq, k, 0) {
			for x, e := range row {
				want[y][x] += r.leaksOn(float64(y))[j] * e
			}
		}
	}
	require.Greater(t, sumOf(off), 100.0)
	require.InDelta(t, 1, sumOf(off)/sumOf(want), 1e-4)
	for y := range want {
		require.InDeltaSlice(t, want[y], off[y], 0.02)
	}

	mean, square := 0.0, 0.0
	for y := range 56 {
		for _, leak := range r.leaksOn(float64(y))[:12] {
			mean += leak / 0.01 / (56 * 12)
			square += math.Pow(leak/0.01-1, 2) / (56 * 12)
		}
	}
	require.InDelta(t, 1, mean, 0.15)
	require.InDelta(t, 0.2, math.Sqrt(square), 0.1, "one field's rms scatters")

	wide := smallDark(t)
	wide.DMD.Columns = 240
	_, faulty, _ = pairOf(t, faultSequence(t, wide, "slit-scan", 12, 0), &Scene{SeeingFWHMArcsec: 1, Sky: scene.Sky}, Fault{Leak, 0.01})
	_, narrow, _ := pairOf(t, seq, &Scene{SeeingFWHMArcsec: 1, Sky: scene.Sky}, Fault{Leak, 0.01})
	step := seq.StepsOf(sequence.AllOff)[0]
	require.Greater(t, sumOf(electrons(t, faulty, seq, step, 0)), 1.5*sumOf(electrons(t, narrow, seq, step, 0)))
}

// Over fields of many seeds the leak's structure is 20 %.
func TestLeakStructure(t *testing.T) {
	square, count := 0.0, 0
	for seed := range uint64(200) {
		w := newWaves(seed, "leak", 2)
		for k := range 25 {
			v := leakRMS * w.at(float64(k%5)/5, float64(k/5)/5)
			square += v * v
			count++
		}
	}
	// 200 independent fields of four waves: the mean square scatters by less
	// than 1/sqrt(200).
	require.InDelta(t, 0.2, math.Sqrt(square/float64(count)), 0.2*5/math.Sqrt(200)/2)
}

// Struck samples: as many as asked for in 1000, their charges log-normal of
// median 1500 e and sigma 0.8, in tracks of neighbours; the frames show them
// where the truth lists them.
func TestFaultCosmic(t *testing.T) {
	p := smallDark(t)
	p.Detector.SaturationADU = 65000
	seq := faultSequence(t, p, "m-sequence", 15, 3)
	clean, faulty, truth := pairOf(t, seq, smallScene(580), Fault{Cosmic, 4})
	var logs []float64
	samples := 0
	for k, st := range seq.Steps {
		f := truth.Frames[k]
		if st.Kind == sequence.Bias {
			require.Empty(t, f.HitE)
			continue
		}
		samples += p.Detector.Columns * p.Detector.Rows
		a, b := electrons(t, clean, seq, k, 0), electrons(t, faulty, seq, k, 0)
		for i, e := range f.HitE {
			a[f.HitY[i]][f.HitX[i]] += e
			logs = append(logs, math.Log(e/1500))
		}
		for y := range a {
			for x := range a[y] {
				require.InDelta(t, math.Min(a[y][x], 70000), math.Min(b[y][x], 70000), 0.02)
			}
		}
	}
	n := float64(len(logs))
	mean, square := 0.0, 0.0
	for _, l := range logs {
		mean += l / n
		square += l * l / n
	}
	t.Logf("%.0f hits in %d samples: %.3f per 1000; median %.0f e, sigma %.3f", n, samples, n/float64(samples)*1000, 1500*math.Exp(mean), math.Sqrt(square-mean*mean))
	// Hits come in tracks of 5.5 pixels in the mean (mean square 38.5), so that
	// their number scatters by sqrt(38.5/5.5 n).
	require.InDelta(t, 4, n/float64(samples)*1000, math.Max(0.04, 5*math.Sqrt(7*n)/float64(samples)*1000))
	require.InDelta(t, 0, mean, 5*0.8/math.Sqrt(n))
	require.InDelta(t, 0.8, math.Sqrt(square-mean*mean), 5*0.8/math.Sqrt(2*n))
}

// Lost frames have no file; exchanged ones bear each other's STEP and MASKID and
// nothing else of each other.
func TestFaultLostAndMislabel(t *testing.T) {
	seq := faultSequence(t, smallDark(t), "m-sequence", 15, 3)
	clean, faulty, truth := pairOf(t, seq, smallScene(580), Fault{Lost, 2}, Fault{Mislabel, 4})
	lost, exchanged := 0, 0
	for k, st := range seq.Steps {
		path := filepath.Join(faulty, FrameFile(k+1))
		f := truth.Frames[k]
		if f.Lost {
			require.NoFileExists(t, path)
			require.Equal(t, sequence.Science, st.Kind)
			lost++
			continue
		}
		file, err := fitsutil.Open(path)
		require.NoError(t, err)
		header := file.HDUs()[0].Header
		step, err := header.Int("STEP")
		require.NoError(t, err)
		mask, err := header.Str("MASKID")
		require.NoError(t, err)
		require.NoError(t, file.Close())
		want := st.Step
		if f.Labelled != 0 {
			want = f.Labelled
			exchanged++
			require.Equal(t, st.Step, truth.Frames[want-1].Labelled)
			require.Equal(t, sequence.Science, st.Kind)
		}
		require.EqualValues(t, want, step)
		require.Equal(t, seq.Steps[want-1].MaskID, mask)
		require.Equal(t, electrons(t, clean, seq, k, 0), electrons(t, faulty, seq, k, 0))
	}
	require.Equal(t, 2, lost)
	require.Equal(t, 4, exchanged)
}

// Stale, flipped and inverted masks: the frames show what such masks show.
func TestFaultMasks(t *testing.T) {
	seq := faultSequence(t, smallDark(t), "slit-scan", 12, 0)
	scene := smallScene(580)
	clean, faulty, truth := pairOf(t, seq, scene, Fault{Stale, 4})
	science := seq.StepsOf(sequence.Science)
	stale := 0
	for i, k := range science {
		shown := k
		if truth.Frames[k].Shown != 0 {
			stale++
			shown = truth.Frames[k].Shown - 1
			require.Equal(t, science[i-1], shown)
		}
		require.Equal(t, electrons(t, clean, seq, shown, 0), electrons(t, faulty, seq, k, 0))
	}
	require.Equal(t, 4, stale)

	byElement := map[int]int{}
	for _, k := range science {
		byElement[openElement(seq, k)] = k
	}
	_, faulty, truth = pairOf(t, seq, scene, Fault{Flip, 0})
	for j, k := range byElement {
		require.True(t, truth.Frames[k].Flipped)
		require.Equal(t, electrons(t, clean, seq, byElement[11-j], 0), electrons(t, faulty, seq, k, 0))
	}
	for _, k := range seq.StepsOf(sequence.Arc) {
		require.True(t, truth.Frames[k].Flipped)
	}

	_, faulty, truth = pairOf(t, seq, scene, Fault{Invert, 3})
	all := sumOf(electrons(t, clean, seq, seq.StepsOf(sequence.AllOn)[0], 0))
	inverted := 0
	for _, k := range science {
		one := sumOf(electrons(t, clean, seq, k, 0))
		want := one
		if truth.Frames[k].Inverted {
			inverted++
			want = all - one
		}
		require.InDelta(t, want, sumOf(electrons(t, faulty, seq, k, 0)), 1e-5*all)
	}
	require.Equal(t, 3, inverted)
}

// Charge that lags: an all-off frame holds a part of the frame before it.
func TestFaultPersist(t *testing.T) {
	seq := faultSequence(t, smallDark(t), "m-sequence", 15, 3)
	_, faulty, _ := pairOf(t, seq, smallScene(580), Fault{Persist, 0.02})
	for _, k := range seq.StepsOf(sequence.AllOff)[1:] {
		before, after := electrons(t, faulty, seq, k-1, 0), electrons(t, faulty, seq, k, 0)
		require.InDelta(t, 0.02, sumOf(after)/sumOf(before), 1e-5)
	}
}

// On lamp frames, all on - even - odd + off is the neighbour term alone: d of
// the light between open neighbours.
func TestFaultNeighbour(t *testing.T) {
	seq := faultSequence(t, smallDark(t), "m-sequence", 15, 3)
	_, faulty, _ := pairOf(t, seq, smallScene(580), Fault{Neighbour, 0.03})
	flats := seq.StepsOf(sequence.Flat)
	var images [4][][]float64
	for i := range images {
		images[i] = electrons(t, faulty, seq, flats[i], 0)
	}
	term, all := 0.0, 0.0
	for y := range images[0] {
		for x := range images[0][y] {
			term += images[0][y][x] - images[1][y][x] - images[2][y][x] + images[3][y][x]
			all += images[1][y][x] + images[2][y][x]
		}
	}
	// Twelve elements have eleven neighbourhoods; the outer two elements count
	// half. d grows with the wavelength about its value at 580 nm, the middle of
	// the light.
	require.InDelta(t, 0.03*11/12, term/all, 0.03*0.01)
}
