package rehearse

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/sequence"
)

// The lists are read whole, and their vacuum wavelengths are the air ones through
// Ciddor's index of package physics (itself checked against outside values).
func TestLampLines(t *testing.T) {
	lines, err := readLampLines()
	require.NoError(t, err)
	require.Len(t, lines, 156+24)
	find := func(element string, nm float64) {
		for _, l := range lines {
			if l.Element == element && math.Abs(l.WavelengthNM-nm) < 2e-5 {
				return
			}
		}
		t.Errorf("%s %v is missing", element, nm)
	}
	// Published pairs of Sansonetti, Blackwell & Saloman 2004 and NIST ASD.
	find("Ne", 585.41102)
	find("Ne", 640.40178)
	find("Hg", 546.22676)
	find("Kr", physics.AirToVacuum(1678.5128))
	find("Xe", physics.AirToVacuum(1672.8150))
	require.Equal(t, []string{"Ne", "Ar"}, lampElements("NeAr", lines))
	require.Equal(t, []string{"Hg", "Ne", "Kr", "Xe"}, lampElements("HgNeKrXe", lines))
	for _, bad := range []string{"", "Nea", "NeNe", "neon", "ArX"} {
		require.Nil(t, lampElements(bad, lines), bad)
	}
}

// In the brightest frame of each kind with a lamp the brightest pixel is at 60 %
// of saturation, on the whole detector.
func TestLampsAreWellExposed(t *testing.T) {
	for _, name := range testProfiles() {
		p := smallProfile(t, name)
		seq := planned(t, p, smallTarget(p))
		dir, _ := rehearsed(t, seq, smallScene(580), Options{Perfect: true, Noiseless: true, NoTruth: true})
		for _, kind := range []sequence.Kind{sequence.Flat, sequence.Arc} {
			most := 0.0
			for _, k := range seq.StepsOf(kind) {
				for _, row := range electrons(t, dir, seq, k, 0) {
					for _, e := range row {
						most = math.Max(most, e)
					}
				}
			}
			level := most / fullWellE(p.Detector)
			t.Logf("%s %s: %.3f of saturation", name, kind, level)
			require.InDelta(t, 0.6, level, 0.06)
		}
	}
}

// Over many seeds a real lamp lacks 10 % of its listed lines, has 5 % unlisted
// ones and intensities off by up to 3.
func TestRealLamps(t *testing.T) {
	p := smallProfile(t, "optical")
	p.Spectrograph.Throughput[0].WavelengthNM, p.Spectrograph.Throughput[3].WavelengthNM = 450, 900
	lines, err := readLampLines()
	require.NoError(t, err)
	listed := lampEmission(p, lines, "Ne", 0, true)
	at := map[float64]float64{}
	for _, l := range listed {
		at[l.nm] = l.photons
	}
	kept, unknown, far := 0, 0, 1.0
	const seeds = 300
	for seed := range uint64(seeds) {
		for _, l := range lampEmission(p, lines, "Ne", seed, false) {
			photons, known := at[l.nm]
			if !known {
				unknown++
				continue
			}
			kept++
			factor := math.Max(l.photons/photons, photons/l.photons)
			require.LessOrEqual(t, factor, 3.0001)
			far = math.Max(far, factor)
		}
	}
	all := float64(seeds * len(listed))
	require.InDelta(t, 0.9, float64(kept)/all, 5*math.Sqrt(0.09/all))
	require.InDelta(t, 0.05, float64(unknown)/all, 5*math.Sqrt(0.05/all))
	require.Greater(t, far, 2.9)
}

// What a real instrument adds has the sizes stated, and leaves the mean.
func TestTexture(t *testing.T) {
	square, sum, count := 0.0, 0.0, 0
	for seed := range uint64(300) {
		w := newWaves(seed, "x", 4)
		for k := range 100 {
			v := w.at(float64(k%10)/10, float64(k/10)/10)
			sum, square, count = sum+v, square+v*v, count+1
		}
	}
	// Each field is four waves: 1200 independent ones.
	require.InDelta(t, 0, sum/float64(count), 5/math.Sqrt(1200))
	require.InDelta(t, 1, math.Sqrt(square/float64(count)), 5/math.Sqrt(2*1200))

	p := smallProfile(t, "optical")
	d := newDetector(p.Detector, 1, false, false)
	sum, square, count = 0, 0, 0
	for y := range p.Detector.Rows {
		for _, r := range d.response(y) {
			sum, square, count = sum+r, square+(r-1)*(r-1), count+1
		}
	}
	require.InDelta(t, 1, sum/float64(count), 5*responseRMS/math.Sqrt(float64(count)))
	require.InDelta(t, responseRMS, math.Sqrt(square/float64(count)), 5*responseRMS/math.Sqrt(2*float64(count)))
	d.perfect = true
	for _, r := range d.response(3) {
		require.Equal(t, 1.0, r)
	}
}

// An imperfect instrument changes the frames by its few per cent and nothing
// else: the light of a flat keeps its sum.
func TestImperfectFlatKeepsItsLight(t *testing.T) {
	p := smallDark(t)
	seq := planned(t, p, smallTarget(p))
	ratio := 0.0
	const seeds = 12
	for seed := range uint64(seeds) {
		r, err := newRehearsal(seq, smallScene(580), Options{Seed: seed, Noiseless: true, NoTruth: true, Workers: 1, MemoryBytes: 1 << 26})
		require.NoError(t, err)
		plain := r.drawnFlat(t)
		r.maps = nil
		ratio += plain / r.drawnFlat(t) / seeds
	}
	// Slit function 2 % and efficiency 1.5 % of a field of few waves, 12 seeds.
	require.InDelta(t, 1, ratio, 5*0.025/math.Sqrt(seeds))
}

// drawnFlat is the light of all elements on the lamp, e/s.
func (r *rehearsal) drawnFlat(t *testing.T) float64 {
	d, err := r.illuminate(t.Context(), 0, r.optics.rows)
	require.NoError(t, err)
	sum := 0.0
	for _, rows := range d.rows[1] {
		for _, beam := range rows[layerMain] {
			for _, e := range beam {
				sum += float64(e)
			}
		}
	}
	return sum
}
