package hadamard

import (
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// TestReadNoiseTable: sources in the file.
func TestReadNoiseTable(t *testing.T) {
	for _, r := range readCSV(t, "read_noise.csv") {
		d := Design{V: atoi(t, r[0]), K: atoi(t, r[1]), L: atoi(t, r[2])}
		if want := atof(t, r[3]); want != 0 {
			require.InDelta(t, want, d.ReadNoiseVariance(), 6e-8, "%v", d)
		}
		if want := atof(t, r[4]); want != 0 {
			require.InDelta(t, want, d.ReadNoiseGain(), 6e-5, "%v", d)
		}
		if d.IsS() {
			v := float64(d.V)
			require.InEpsilon(t, 4*v/((v+1)*(v+1)), d.ReadNoiseVariance(), 1e-14)
			require.InEpsilon(t, (v+1)/(2*math.Sqrt(v)), d.ReadNoiseGain(), 1e-14)
		}
		// The other form of the bound: (1/k^2 + (v-1)^2/(k(v-k)))/v, Ratner et al. 2007.
		v, k := float64(d.V), float64(d.K)
		require.InEpsilon(t, (1/(k*k)+(v-1)*(v-1)/(k*(v-k)))/v, d.ReadNoiseVariance(), 1e-12)
	}
	require.Equal(t, 1.0, Design{V: 9, K: 1}.ReadNoiseVariance())
	require.InEpsilon(t, 60./63*64/(2*math.Sqrt(63)), Design{63, 32, 16}.ReadNoiseGainDark(60), 1e-14)
}

// TestPhotonVectors: worked scenes at v = 7 (source in the file). The slit
// scan has as many readings, each as long, so n = v.
func TestPhotonVectors(t *testing.T) {
	for _, r := range readCSV(t, "photon_vectors.csv") {
		total, element := 0.0, 0.0
		for j, s := range strings.Fields(r[0]) {
			total += atof(t, s)
			if j == atoi(t, r[2]) {
				element = atof(t, s)
			}
		}
		d := Design{7, 4, 2}
		require.InEpsilon(t, atof(t, r[1]), d.PhotonVariance(element, total), 1e-12)
		require.InDelta(t, atof(t, r[3]), d.Gain(Exposure{Element: element, Total: total}, 7), 6e-7)
	}
}

// TestFlatGain: the table of gains on a flat scene, and its break-even
// (v^2-1)/(v-1)^2 (sources in the file).
func TestFlatGain(t *testing.T) {
	ratios := []float64{0, 0.1, 1, 10, 100}
	for _, r := range readCSV(t, "flat_gain.csv") {
		v := atoi(t, r[0])
		d := Design{v, (v + 1) / 2, (v + 1) / 4}
		for i, ratio := range ratios {
			flat := Exposure{Element: 50, Total: 50 * float64(v), ReadVariance: 50 * ratio}
			require.InDelta(t, atof(t, r[1+i]), d.Gain(flat, v), 6e-7, "v = %d, ratio %g", v, ratio)
		}
		even := d.BreakEvenReadVariance()
		require.InEpsilon(t, float64(v*v-1)/float64((v-1)*(v-1)), even, 1e-12)
		require.InEpsilon(t, 1, d.Gain(Exposure{Element: 1, Total: float64(v), ReadVariance: even}, v), 1e-12)
	}
}

// TestThresholds: sources in the file.
func TestThresholds(t *testing.T) {
	for _, r := range readCSV(t, "thresholds.csv") {
		d := Design{atoi(t, r[0]), atoi(t, r[1]), atoi(t, r[2])}
		threshold := d.PhotonThreshold(d.V)
		require.InDelta(t, atof(t, r[3]), threshold, 6e-7)
		require.InEpsilon(t, 1, d.Gain(Exposure{Element: threshold, Total: float64(d.V)}, d.V), 1e-12)
		if want := atof(t, r[4]); want != 0 {
			require.InDelta(t, want, d.Gain(Exposure{Element: 1, Total: float64(d.V)}, d.V), 6e-7)
		}
	}
	require.Equal(t, math.Inf(1), Design{13, 4, 1}.PhotonThreshold(2))
	require.Equal(t, math.Inf(1), Design{9, 1, 0}.BreakEvenReadVariance())
}

// TestGainWithDarkColumns: in equal total time the v frames are n/v as long as
// the slit scan's; checked from the readings' noise up, not from the formula.
func TestGainWithDarkColumns(t *testing.T) {
	const seconds, readNoise, dark = 1000., 4., 0.02 // total time, e, e/s
	d, n := Design{127, 64, 32}, 110
	for _, rate := range []float64{0, 1e-3, 0.5, 30} { // e/s of the element; 5 e/s of all others
		total := rate + 5
		code, slit := seconds/float64(d.V), seconds/float64(n)
		variance := 4 * 127. / (128 * 128) * (readNoise*readNoise + dark*code)
		variance += 2 * total * code / 128
		codeSNR := rate * code / math.Sqrt(variance)
		slitSNR := rate * slit / math.Sqrt(readNoise*readNoise+(dark+rate)*slit)
		e := Exposure{Element: rate * code, Total: total * code, Pedestal: dark * code, ReadVariance: readNoise * readNoise}
		require.InDelta(t, codeSNR, d.SNR(e), 1e-12*(1+codeSNR))
		if rate > 0 {
			require.InEpsilon(t, codeSNR/slitSNR, d.Gain(e, n), 1e-12)
		}
	}
	require.InEpsilon(t, d.ReadNoiseGainDark(n), d.Gain(Exposure{Element: 1e-12, Total: 1e-12, ReadVariance: 1}, n), 1e-9)
	photon := d.Gain(Exposure{Element: 40, Total: 1000}, n)
	require.InEpsilon(t, math.Sqrt(110./127*40*128/2000), photon, 1e-12)
	// Twice the mean breaks even whatever the number of dark columns.
	threshold := d.PhotonThreshold(n)
	require.InEpsilon(t, 2*127./128, threshold, 1e-12)
	require.InEpsilon(t, 1, d.Gain(Exposure{Element: threshold * 10, Total: 10 * float64(n)}, n), 1e-12)
}

// TestThroughputNoise: against A diag(y^2) A' multiplied out, averaged over the
// elements; for an S-matrix every element has the same.
func TestThroughputNoise(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 31), mustCode(t, Legendre, 19), planarCode(t, 13)} {
		for name, f := range scenes(c.V()) {
			total, squares := 0.0, 0.0
			for _, x := range f {
				total += x
				squares += x * x
			}
			y := readings(c, f)
			a := inverseOf(c)
			mean := 0.0
			for j := range c.V() {
				variance := 0.0
				for i := range c.V() {
					e := 0.01 * a.At(j, i) * float64(y[i])
					variance += e * e
				}
				mean += variance / float64(c.V())
				if c.Design().IsS() {
					require.InEpsilon(t, math.Sqrt(variance), c.Design().ThroughputNoise(0.01, total, squares), 1e-5, name)
				}
			}
			require.InEpsilon(t, math.Sqrt(mean), c.Design().ThroughputNoise(0.01, total, squares), 1e-5, name)
		}
	}
	// Many elements alike: perFrame total/sqrt(v).
	many := Design{1023, 512, 256}.ThroughputNoise(0.01, 1023, 1023)
	require.InEpsilon(t, 0.01*math.Sqrt(1023), many, 1e-3)
}

// TestRemoveLeak: decodes of readings with leaking closed mirrors, multiplied
// out, come back to the scene.
func TestRemoveLeak(t *testing.T) {
	codes := smallCodes(t)
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.SampledFrom(codes).Draw(t, "code")
		leak := rapid.Float64Range(0, 0.3).Draw(t, "leak")
		f := rapid.SliceOfN(rapid.Float64Range(0, 1000), c.V(), c.V()).Draw(t, "f")
		w := matrixOf(c)
		w.Apply(func(_, _ int, x float64) float64 { return x + leak*(1-x) }, w)
		var y, x mat.VecDense
		y.MulVec(w, mat.NewVecDense(c.V(), f))
		x.MulVec(inverseOf(c), &y)
		decoded := x.RawVector().Data
		c.Design().RemoveLeak(decoded, leak)
		for j := range f {
			if math.Abs(decoded[j]-f[j]) > 1e-8 {
				t.Fatalf("%s %d: element %d is %g, got %g", c.Family(), c.V(), j, f[j], decoded[j])
			}
		}
	})
}
