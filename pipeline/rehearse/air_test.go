package rehearse

import (
	"context"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// airProfile is the embedded profile of the widest band, in a mounting, without dark
// current.
func airProfile(t testing.TB, mounting string, parity int) *instrument.Profile {
	p, err := instrument.Load("visible")
	require.NoError(t, err)
	p.Detector.DarkEPerS = 0
	p.DMD.Parity = parity
	if mounting == instrument.Diagonal {
		p.DMD.Mounting, p.DMD.Columns, p.DMD.Rows = mounting, 50, 50
	}
	require.NoError(t, p.Validate())
	return p
}

// airTarget has few frames and a reference star of another place; the field rises from
// an air mass of 2.2 and culminates.
func airTarget() *sequence.Target {
	v, dark := 15, 3
	return &sequence.Target{
		Name: "field", RADeg: 201.4, DecDeg: 16.2, RotangDeg: -35, StartUTC: "2031-03-24T19:30:00Z",
		Code:         sequence.CodeChoice{Family: "m-sequence", V: &v, Dark: &dark, ElementMirrors: 2, Order: sequence.OrderShuffled, Seed: 5, Cycles: 1},
		DwellSeconds: 60, AllOffEvery: 15,
		Calibration: sequence.Calibration{
			Bias:    sequence.BiasFrames{Count: 1},
			Arc:     sequence.ArcFrames{Every: 1},
			RefStar: &sequence.RefStarFrames{Name: "star", Count: 1, DwellSeconds: 30, RADeg: 230, DecDeg: 30, Elements: [2]int{2, 11}},
		},
	}
}

// withOpenFrames appends all-on steps 100 minutes apart.
func withOpenFrames(t testing.TB, p *instrument.Profile, target *sequence.Target, count int) *sequence.Sequence {
	seq, _, err := plan.Build(context.Background(), target, p)
	require.NoError(t, err)
	all := make([]uint8, seq.V)
	none := make([]uint8, seq.V)
	for i := range all {
		all[i] = 1
	}
	add := func(kind sequence.Kind, seconds float64, bits []uint8) {
		seq.Steps = append(seq.Steps, sequence.Step{Step: len(seq.Steps) + 1, Kind: kind, ExptimeSeconds: seconds, Row: -1})
		seq.Code = append(seq.Code, bits)
	}
	for range count {
		add(sequence.AllOn, 60, all)
		add(sequence.AllOff, 6000, none)
	}
	require.NoError(t, seq.Write(context.Background(), filepath.Join(t.TempDir(), "seq")))
	return seq
}

// lineScene is a star of lines alone, without sky.
func lineScene() *Scene {
	star := Source{Kind: KindStar, EastArcsec: 0.4, NorthArcsec: -0.3}
	for _, nm := range []float64{415, 470, 540, 610, 690, 780, 880} {
		star.Lines = append(star.Lines, Line{WavelengthNM: nm, FluxWM2: 1e-15})
	}
	return &Scene{SeeingFWHMArcsec: 1, Sources: []Source{star}}
}

func testAir() *Atmosphere {
	return &Atmosphere{
		PressureHPa: ptr(815), TemperatureC: ptr(4), WaterHPa: ptr(4), GuideNM: ptr(560), Refraction: true,
		Extinction: instrument.Extinction{{WavelengthNM: 380, MagPerAirmass: 0.423}, {WavelengthNM: 600, MagPerAirmass: 0.17}, {WavelengthNM: 950, MagPerAirmass: 0.05}},
	}
}

var noiseless = Options{Seed: 5, Perfect: true, Noiseless: true}

// Lines of a star, measured in frames, lie where refraction puts them and are as bright
// as the air leaves them, against Python and astropy: both mountings and parities,
// air masses from 1.5 to 2.2. The star's image has sigma 1.2 px; centroids are those of
// frames without noise.
func TestAirAgainstAstropy(t *testing.T) {
	for _, c := range []struct {
		mounting string
		parity   int
	}{{instrument.Square, 1}, {instrument.Diagonal, -1}} {
		seq := withOpenFrames(t, airProfile(t, c.mounting, c.parity), airTarget(), 4)
		scene := lineScene()
		scene.RefStar = &RefStar{ABMag: 14, AtNM: 550}
		opts := noiseless
		opts.NoTruth = true
		clean, _ := rehearsed(t, seq, scene, opts)
		scene.Atmosphere = testAir()
		airy, _ := rehearsed(t, seq, scene, opts)
		dir := filepath.Join(t.TempDir(), "seq")
		require.NoError(t, seq.Write(context.Background(), dir))

		lines := strings.Split(strings.TrimSpace(outside.Python(t, "rehearse_air.py", dir, clean, airy)), "\n")
		require.Len(t, lines, 4*7)
		worst, largest, most, worstFlux := 0.0, 0.0, 0.0, 0.0
		for _, line := range lines {
			var v [12]float64
			for i, word := range strings.Fields(line) {
				x, err := strconv.ParseFloat(word, 64)
				require.NoError(t, err)
				v[i] = x
			}
			off := math.Hypot(v[2]-v[4], v[3]-v[5])
			worst, largest = max(worst, off), max(largest, math.Hypot(v[4], v[5]))
			most, worstFlux = max(most, v[8]), max(worstFlux, math.Abs(v[6]/v[7]-1))
			require.InDelta(t, 0, off, 0.005, "px: %s", line)
			require.InEpsilon(t, v[7], v[6], 3e-4, "transmission: %s", line)
			require.InEpsilon(t, v[9], v[8], 5e-4, "air mass: %s", line)
			// astropy (ERFA) has another index of air, and a round earth.
			require.InDelta(t, v[11], v[10], 0.004+0.03*math.Abs(v[11]), "arc seconds: %s", line)
		}
		t.Logf("%s: moved by up to %.2f px, off by %.5f px; transmission off by %.1e; air mass to %.2f", c.mounting, largest, worst, worstFlux, most)
		require.Greater(t, largest, 2.0)
		require.Greater(t, most, 2.0)
	}
}

// The sky is the same with and without air, to the byte, where no source is.
func TestAirLeavesTheSky(t *testing.T) {
	seq := withOpenFrames(t, airProfile(t, instrument.Square, 1), airTarget(), 1)
	scene := &Scene{SeeingFWHMArcsec: 1, Sky: Sky{ContinuumABArcsec2: ptr(19), Lines: []SkyLine{{WavelengthNM: 557.9, FluxWM2Arcsec2: 3e-18}}}, RefStar: &RefStar{ABMag: 14, AtNM: 550}}
	clean, _ := rehearsed(t, seq, scene, noiseless)
	scene.Atmosphere = testAir()
	airy, _ := rehearsed(t, seq, scene, noiseless)
	for k, st := range seq.Steps {
		if st.Kind == sequence.RefStar {
			continue
		}
		a, err := os.ReadFile(filepath.Join(clean, FrameFile(k+1)))
		require.NoError(t, err)
		b, err := os.ReadFile(filepath.Join(airy, FrameFile(k+1)))
		require.NoError(t, err)
		require.Equal(t, a, b, "step %d", k+1)
	}
	require.NoFileExists(t, filepath.Join(clean, TruthFolder, AirFile))
}

func airTruthOf(t *testing.T, dir string) AirTruth {
	text, err := os.ReadFile(filepath.Join(dir, TruthFolder, AirFile))
	require.NoError(t, err)
	var truth AirTruth
	require.NoError(t, json.Unmarshal(text, &truth))
	return truth
}

// truth.fits is that of a night without air times the mean transmission of the science
// steps, which truth/atmosphere.json states; the sky's is the same.
func TestAirTruth(t *testing.T) {
	target := airTarget()
	target.DwellSeconds = 600 // from an air mass of 2.2 to 1.6
	seq := planned(t, airProfile(t, instrument.Square, 1), target)
	scene := &Scene{
		SeeingFWHMArcsec: 1, Sky: Sky{ContinuumABArcsec2: ptr(19)}, RefStar: &RefStar{ABMag: 14, AtNM: 550},
		Sources: []Source{{Kind: KindStar, ABMag: ptr(13), AtNM: 550}, {Kind: KindGalaxy, EastArcsec: 1, RadiusArcsec: 1, ABMag: ptr(15), AtNM: 550}},
	}
	clean, _ := rehearsed(t, seq, scene, noiseless)
	scene.Atmosphere = testAir()
	airy, _ := rehearsed(t, seq, scene, noiseless)
	state := airTruthOf(t, airy)

	var airmasses []float64
	for _, f := range state.Frames {
		require.Equal(t, seq.Steps[f.Step-1].Kind, f.Kind)
		if f.Kind == sequence.Science {
			airmasses = append(airmasses, f.Airmass)
		}
	}
	require.Len(t, airmasses, 15)
	skyBefore, _, _, _ := truth(t, clean, "SKY")
	skyAfter, _, _, _ := truth(t, airy, "SKY")
	require.Equal(t, skyBefore, skyAfter)
	before, n, rows, voxels := truth(t, clean, "SIGNAL")
	after, _, _, _ := truth(t, airy, "SIGNAL")
	bright := 0
	for l := range voxels {
		nm := seq.Profile.Grid.WavelengthNM(float64(l))
		require.InDelta(t, nm, state.WavelengthNM[l], 1e-9)
		k := 0.4 + (nm-400)*(0.17-0.4)/200
		if nm > 600 {
			k = 0.17 + (nm-600)*(0.05-0.17)/350
		}
		want := 0.0
		for _, x := range airmasses {
			want += math.Pow(10, -0.4*k*x) / 15
		}
		require.InEpsilon(t, want, state.Transmission[l], 1e-9)
		for i := l * n * rows; i < (l+1)*n*rows; i++ {
			source := float64(before[i] - skyBefore[i])
			if !(source > 500) {
				continue
			}
			bright++
			// A voxel holds light of its neighbours: at the band's edge more from one side,
			// where extinction changes by 0.3 % a voxel, and the curve bends at 600 nm.
			require.InEpsilon(t, want, float64(after[i]-skyBefore[i])/source, 2e-3, "%v nm", nm)
		}
	}
	require.Greater(t, bright, 10000)
	require.Less(t, airmasses[14], 0.8*airmasses[0])
}

// A frame of the reference star holds the light that its spectrum, the telescope and the
// air at the star's air mass make of it, against an integral by numpy; its header is
// the star's, and its light lies on the wide element's middle.
func TestRefStarFrame(t *testing.T) {
	seq := planned(t, airProfile(t, instrument.Square, 1), airTarget())
	scene := lineScene()
	scene.RefStar = &RefStar{ABMag: 12, AtNM: 550, TemperatureK: 9000, SeeingFWHMArcsec: ptr(0.9)}
	scene.Atmosphere = testAir()
	dir, _ := rehearsed(t, seq, scene, noiseless)
	seqDir := filepath.Join(t.TempDir(), "seq")
	require.NoError(t, seq.Write(context.Background(), seqDir))
	words := strings.Fields(outside.Python(t, "rehearse_refstar.py", seqDir, dir))
	require.Len(t, words, 7)
	var v [7]float64
	for i, word := range words {
		x, err := strconv.ParseFloat(word, 64)
		require.NoError(t, err)
		v[i] = x
	}
	t.Logf("electrons %.0f, expected %.0f; rows off by %.4f px rms, columns by %.4f px", v[0], v[1], v[4], v[5])
	require.InEpsilon(t, v[1], v[0], 2e-4)
	require.InEpsilon(t, v[3], v[2], 5e-4, "air mass")
	require.Less(t, v[4], 0.005, "px: rows by wavelength")
	require.Less(t, math.Abs(v[5]), 0.02, "px: the place of the band's edge")
	require.Greater(t, v[6], 1.0, "px: the trace of refraction from end to end")

	scene.RefStar = nil
	_, err := Run(context.Background(), seq, scene, noiseless, t.TempDir(), nil)
	require.EqualError(t, err, "the sequence has refstar steps and the scene has no star for them; add refstar to the scene")
}

// A field below the horizon has no air mass to be seen through.
func TestAirBelowTheHorizon(t *testing.T) {
	target := airTarget()
	target.DecDeg = -60
	seq := planned(t, airProfile(t, instrument.Square, 1), target)
	scene := lineScene()
	scene.RefStar, scene.Atmosphere = &RefStar{ABMag: 12, AtNM: 550}, testAir()
	_, err := Run(context.Background(), seq, scene, noiseless, t.TempDir(), nil)
	require.ErrorContains(t, err, "step 2: RA 201.4 DEC -60 lies below the horizon at 2031-03-24T19:3")
	require.ErrorContains(t, err, "; choose another start_utc")
}

// The bytes of a night through air do not depend on workers and memory, with faults that
// draw each frame anew and without; and such faults of next to no size change nothing that
// is seen.
func TestAirBytes(t *testing.T) {
	p := airProfile(t, instrument.Square, 1)
	p.Detector.Rows, p.DMD.Rows, p.Spectrograph.YCenterPx = 32, 28, 15.5
	p.Detector.Amplifiers[0].Data, p.Detector.Amplifiers[0].Overscan = instrument.Section{1, 624, 1, 32}, instrument.Overscan{625, 640, 1, 32}
	seq := planned(t, p, airTarget())
	scene := lineScene()
	scene.Sources[0].Lines = scene.Sources[0].Lines[2:4]
	scene.Sources[0].ABMag, scene.Sources[0].AtNM = ptr(14), 550
	scene.Sources[0].Velocity = Velocity{SystemicKmS: 300, GradientKmSArcsec: 40, PADeg: 30}
	scene.Sky.ContinuumABArcsec2 = ptr(19.5)
	scene.RefStar, scene.Atmosphere = &RefStar{ABMag: 12, AtNM: 550}, testAir()
	faults := []Fault{{Leak, 0.002}, {Colour, 0.05}, {Neighbour, 0.03}, {Drift, 0.1}}
	night := func(workers int, memory int64, faults ...Fault) string {
		dir, _ := rehearsed(t, seq, scene, Options{Seed: 3, Workers: workers, MemoryBytes: memory, Noiseless: true, Faults: faults})
		return dir
	}
	one, two := night(1, 64<<20, faults...), night(3, 4<<20, faults...)
	redrawn := night(2, 64<<20, append(faults, Fault{Guide, 1e-9})...)
	for k := range seq.Steps {
		a, err := os.ReadFile(filepath.Join(one, FrameFile(k+1)))
		require.NoError(t, err)
		b, err := os.ReadFile(filepath.Join(two, FrameFile(k+1)))
		require.NoError(t, err)
		require.Equal(t, a, b, "step %d", k+1)
		x, _, _ := frame(t, one, k)
		y, _, _ := frame(t, redrawn, k)
		// ADU. What leaks has its structure along mirror rows there, along detector rows here.
		require.InDeltaSlice(t, x, y, 0.05, "step %d", k+1)
	}
	for _, name := range []string{TruthFile, AirFile} {
		a, err := os.ReadFile(filepath.Join(one, TruthFolder, name))
		require.NoError(t, err)
		b, err := os.ReadFile(filepath.Join(two, TruthFolder, name))
		require.NoError(t, err)
		require.Equal(t, a, b, name)
	}
}
