package reduce

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"

	"mirrorloom/calib"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
)

// decodeCase is a block of samples with everything that decoding looks at.
type decodeCase struct {
	decoder *decoder
	strip   *strip
	inverse *mat.Dense // W^-1, by LU in float64
}

// newDecodeCase makes one row of random samples about a level of light; frames[i] is
// the number of frames of slot i.
func newDecodeCase(t *testing.T, family hadamard.Family, v, columns int, frames []int) *decodeCase {
	t.Helper()
	code, err := hadamard.New(family, v)
	require.NoError(t, err)
	r := rand.New(rand.NewPCG(uint64(v), 3))
	d := &decoder{code: hadamard.NewDecoder(code), columns: columns, slots: v, k: float64(code.K())}
	for j := range v {
		if j%5 == 2 {
			d.darkColumns = append(d.darkColumns, j)
		} else {
			d.elementColumns = append(d.elementColumns, j)
		}
	}
	slots := make([][]*exposure.Frame, v)
	for i, n := range frames {
		for range n {
			slots[i] = append(slots[i], new(exposure.Frame))
		}
	}
	d.scale = newSlotScale(slots, nil)
	d.sumQuiet()
	s := shape{columns: columns, slots: v}.newStrip(1)
	s.y1, s.columns, s.quiet = 1, columns, [][]float64{make([]float64, columns)}
	for p := range columns {
		s.quiet[0][p] = 9 + float64(p%3)
		s.base[p], s.level[p], s.levelVariance[p] = 1000+float32(p), 2, 0.5
		if p%7 == 3 {
			s.flags[p] = calib.BadPixel
		}
	}
	for i := range s.raw {
		s.raw[i] = 1000 + float32(i%columns) + 50 + 20*float32(r.NormFloat64())
	}
	w := mat.NewDense(v, v, nil)
	for i := range v {
		for j := range v {
			w.Set(i, j, float64(code.Bit(i, j)))
		}
	}
	inverse := new(mat.Dense)
	require.NoError(t, inverse.Inverse(w))
	return &decodeCase{d, s, inverse}
}

// run decodes all blocks.
func (c *decodeCase) run() (*decodedRow, darkChi2) {
	uniform := c.decoder.code.VarianceUniform()
	variances := len(c.decoder.elementColumns)
	if uniform {
		variances = 1
	}
	n := c.decoder.columns
	out := newDecodedRow(len(c.decoder.elementColumns), variances, n)
	var chi2 darkChi2
	w := c.decoder.newWorker()
	for b := range c.decoder.blocks() {
		var q blockQuality
		q.steps = make([]float64, c.decoder.slots)
		c.decoder.run(w, c.strip, 0, b, out, &q)
		chi2.add(q.dark)
	}
	return out, chi2
}

// sample is what slot i has at pixel p above base.
func (c *decodeCase) sample(i, p int) float64 {
	return float64(c.strip.raw[i*c.decoder.columns+p] - c.strip.base[p])
}

func ones(n, frames int) []int {
	list := make([]int, n)
	for i := range list {
		list[i] = frames
	}
	return list
}

// Decoding is the inverse that LU finds, and its variance the sum of squared entries
// times variances of unclipped samples, plus the level's over k^2; dark columns give
// the chi-square of good pixels. Blocks that do not divide the row are among them.
func TestDecodeUniform(t *testing.T) {
	for _, v := range []int{7, 15, 31} {
		frames := ones(v, 1)
		frames[2], frames[5] = 3, 2 // more cycles of some rows
		c := newDecodeCase(t, hadamard.MSequence, v, 2*blockPixels+37, frames)
		out, chi2 := c.run()
		var square, sum float64
		terms := 0
		for p := range c.decoder.columns {
			decoded, variance := c.naive(p)
			for e, j := range c.decoder.elementColumns {
				require.InDelta(t, decoded[j], out.signal[e][p], 1e-3, "v %d pixel %d column %d", v, p, j)
				require.InEpsilon(t, variance[j], out.variance[0][p], 1e-5)
			}
			require.Equal(t, c.strip.flags[p], out.flags[p])
			for _, j := range c.decoder.darkColumns {
				if c.strip.flags[p] == 0 {
					square += decoded[j] * decoded[j]
					sum += variance[j]
					terms++
				}
			}
		}
		require.Equal(t, terms, chi2.terms)
		require.InEpsilon(t, square, chi2.square, 1e-4)
		require.InEpsilon(t, sum, chi2.variance, 1e-4)
	}
}

// naive solves pixel p and propagates the variances of its samples.
func (c *decodeCase) naive(p int) (decoded, variance []float64) {
	v := c.decoder.slots
	decoded, variance = make([]float64, v), make([]float64, v)
	for j := range v {
		for i := range v {
			a, y := c.inverse.At(j, i), c.sample(i, p)
			decoded[j] += a * y
			variance[j] += a * a * c.decoder.scale.quiet[i] * (c.strip.quiet[0][p] + y + float64(c.strip.level[p]))
		}
		variance[j] += float64(c.strip.levelVariance[p]) / (c.decoder.k * c.decoder.k)
	}
	return decoded, variance
}

// A pixel without light keeps its samples' scatter: values below 0 are not clipped,
// so that the mean of the variances is that of dark samples; one whose sum noise has
// taken to nothing is floored.
func TestDecodeVarianceIsNotClipped(t *testing.T) {
	const v = 31
	c := newDecodeCase(t, hadamard.MSequence, v, 4000, ones(v, 1))
	r := rand.New(rand.NewPCG(1, 2))
	for p := range c.decoder.columns {
		c.strip.level[p], c.strip.levelVariance[p] = 0, 0
		c.strip.quiet[0][p] = 1
		for i := range v {
			c.strip.raw[i*c.decoder.columns+p] = c.strip.base[p] + float32(r.NormFloat64())
		}
	}
	for i := range v {
		c.strip.raw[i*c.decoder.columns] = c.strip.base[0] - 5
	}
	out, _ := c.run()
	dark := 4.0 / ((v + 1) * (v + 1)) * v
	var mean float64
	for p, got := range out.variance[0] {
		require.GreaterOrEqual(t, float64(got), varianceFloor*dark*(1-1e-6), "pixel %d", p)
		mean += float64(got) / dark / float64(c.decoder.columns)
	}
	require.InEpsilon(t, varianceFloor*dark, out.variance[0][0], 1e-6)
	// The sum of 31 unit normals has a standard deviation of 0.18 of 31: of 4000
	// pixels the standard error of the mean is 0.0028. The floor, at 2.8 of them,
	// lifts it by less than 2e-4.
	require.InDelta(t, 1, mean, 5*0.0028)
}

// The slit scan's variances come from the light smoothed over 7 columns, and only
// their sum is floored.
func TestDecodeOwnVariances(t *testing.T) {
	const v, columns = 9, 40
	c := newDecodeCase(t, hadamard.SlitScan, v, columns, ones(v, 2))
	for i := range v {
		c.strip.raw[i*columns+20] = c.strip.base[20] - 500 // takes its neighbours below 0
	}
	out, _ := c.run()
	for p := range columns {
		for e, j := range c.decoder.elementColumns {
			require.InDelta(t, c.sample(j, p), out.signal[e][p], 1e-4)
			sum, n := 0.0, 0
			for x := max(0, p-3); x <= min(columns-1, p+3); x++ {
				sum += c.sample(j, x)
				n++
			}
			quiet := c.strip.quiet[0][p]
			want := 0.5 * max(varianceFloor*quiet, quiet+sum/float64(n)+float64(c.strip.level[p]))
			require.InDelta(t, want+float64(c.strip.levelVariance[p]), out.variance[e][p], 1e-4*(1+math.Abs(want)), "pixel %d", p)
		}
	}
}

// A lost slot takes the mean of the others, and the scatter among them as variance;
// the chi-square is not measured.
func TestDecodeLost(t *testing.T) {
	const v, columns = 15, 30
	frames := ones(v, 1)
	frames[4], frames[9] = 0, 0
	c := newDecodeCase(t, hadamard.MSequence, v, columns, frames)
	out, chi2 := c.run()
	require.Zero(t, chi2)
	a := 2.0 / (v + 1)
	for p := range columns {
		var sum, square float64
		for i := range v {
			if frames[i] > 0 {
				sum += c.sample(i, p)
				square += c.sample(i, p) * c.sample(i, p)
			}
		}
		mean := sum / (v - 2)
		scatter := square/(v-2) - mean*mean
		variance := a*a*(sum+(v-2)*(c.strip.quiet[0][p]+float64(c.strip.level[p]))+2*scatter) + float64(c.strip.levelVariance[p])/(c.decoder.k*c.decoder.k)
		require.InEpsilon(t, variance, out.variance[0][p], 1e-4)
		for e, j := range c.decoder.elementColumns {
			decoded := 0.0
			for i := range v {
				y := mean
				if frames[i] > 0 {
					y = c.sample(i, p)
				}
				decoded += c.inverse.At(j, i) * y
			}
			require.InDelta(t, decoded, out.signal[e][p], 1e-3)
		}
	}
}
