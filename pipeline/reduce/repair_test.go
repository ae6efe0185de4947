package reduce

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/product"
)

// repairCase is a row of pixels of one scene, its samples drawn anew for each trial.
type repairCase struct {
	decoder *decoder
	strip   *strip
	dark    []int
	light   []float64 // by code column, of one spectrum in all pixels
	steps   []float64 // W light
	draw    *rand.Rand
}

const repairReadNoise = 5.0

// newRepairCase has a field of uneven light, with a bright element, over columns pixels;
// frames are lost in rows of the code.
func newRepairCase(t *testing.T, v, g, columns int, lost []int) *repairCase {
	t.Helper()
	code, err := hadamard.New(hadamard.MSequence, v)
	require.NoError(t, err)
	set, err := hadamard.ChooseDark(t.Context(), code, g, 7)
	require.NoError(t, err)
	c := &repairCase{dark: set.Columns, light: make([]float64, v), steps: make([]float64, v), draw: rand.New(rand.NewPCG(uint64(v), uint64(len(lost))))}
	d := &decoder{code: hadamard.NewDecoder(code), columns: columns, slots: v, k: float64(code.K()), darkColumns: set.Columns}
	for j := range v {
		if !slices.Contains(set.Columns, j) {
			d.elementColumns = append(d.elementColumns, j)
			c.light[j] = 20 + 15*math.Sin(float64(j))
		}
	}
	c.light[d.elementColumns[3]] = 2000
	for i := range v {
		for j, f := range c.light {
			c.steps[i] += float64(code.Bit(i, j)) * f
		}
	}
	slots := make([][]*exposure.Frame, v)
	for i := range slots {
		if !slices.Contains(lost, i) {
			slots[i] = []*exposure.Frame{{}}
		}
	}
	d.scale = newSlotScale(slots, nil)
	d.sumQuiet()
	c.decoder = d
	s := shape{columns: columns, slots: v}.newStrip(1)
	s.y1, s.columns, s.quiet = 1, columns, [][]float64{slices.Repeat([]float64{repairReadNoise * repairReadNoise}, columns)}
	c.strip = s
	return c
}

// prepare makes the decoder's repair; false where the rows cannot be restored.
func (c *repairCase) prepare(t *testing.T) bool {
	t.Helper()
	checks, err := hadamard.NewChecks(c.decoder.code.Code(), c.dark)
	require.NoError(t, err)
	var lack error
	c.decoder.repair, lack = newRepair(checks, c.decoder.elementColumns, &c.decoder.scale, false, true)
	return lack == nil
}

// expose draws the samples: photon and read noise, garbage in lost rows.
func (c *repairCase) expose() {
	clear(c.strip.flags)
	clear(c.strip.struck)
	for i, y := range c.steps {
		for p := range c.decoder.columns {
			noise := math.Sqrt(y + repairReadNoise*repairReadNoise)
			c.strip.slot(i)[p] = float32(y + noise*c.draw.NormFloat64())
			if c.decoder.scale.isLost(i) {
				c.strip.slot(i)[p] = missing32
			}
		}
	}
}

// pulls decodes and adds (decode - light)/sigma of all elements and pixels.
func (c *repairCase) pulls() (sum, square float64, n int, out *decodedRow, q blockQuality) {
	d := c.decoder
	out = newDecodedRow(len(d.elementColumns), 1, d.columns)
	w := d.newWorker()
	q.steps = make([]float64, d.slots)
	for b := range d.blocks() {
		var part blockQuality
		part.steps = make([]float64, d.slots)
		d.run(w, c.strip, 0, b, out, &part)
		q.restored += part.restored
		q.dark.add(part.dark)
	}
	for e, j := range d.elementColumns {
		own := float64(1)
		if d.repair != nil && d.repair.byElement != nil {
			own = float64(d.repair.byElement[e])
		}
		for p, v := range out.signal[e] {
			if out.flags[p]&product.FlagBad != 0 {
				continue
			}
			pull := (float64(v) - c.light[j]) / math.Sqrt(own*float64(out.variance[0][p]))
			sum += pull
			square += pull * pull
			n++
		}
	}
	return sum, square, n, out, q
}

// Random sets of lost rows, a quarter, half and three quarters of the dark columns: 200
// each. What can be restored is unbiased and scatters as its variance says, all else is
// refused. Figures: rms of the pulls within 5 % of 1 over all sets of a size, their mean
// within 0.02 of 0; the dark decodes' chi-square, of g - lost degrees of freedom, within
// 2 %. A set decodes 256 pixels of 48 elements, whose errors are alike where a sample is
// lost: the standard errors come from the scatter between sets.
func TestRestoreLostRows(t *testing.T) {
	const v, g, sets, columns = 63, 15, 200, 256
	for _, lost := range []int{g / 4, g / 2, 3 * g / 4} {
		draw := rand.New(rand.NewPCG(uint64(lost), 9))
		var means, squares, chi []float64
		singular := 0
		for range sets {
			c := newRepairCase(t, v, g, columns, sorted(draw.Perm(v)[:lost]))
			c.draw = rand.New(rand.NewPCG(draw.Uint64(), 1))
			if !c.prepare(t) {
				singular++
				continue
			}
			c.expose()
			sum, square, n, out, q := c.pulls()
			require.Equal(t, lost*columns, q.restored)
			require.Zero(t, out.flags[0])
			means = append(means, sum/float64(n))
			squares = append(squares, square/float64(n))
			chi = append(chi, q.dark.square/q.dark.variance)
		}
		mean, meanErr := average(means)
		square, squareErr := average(squares)
		dark, darkErr := average(chi)
		t.Logf("%d of %d rows lost, %d dark columns: %d of %d sets singular; pulls %.4f +- %.4f, rms %.4f +- %.4f, dark %.4f +- %.4f",
			lost, v, g, singular, sets, mean, meanErr, math.Sqrt(square), squareErr/2, dark, darkErr)
		require.InDelta(t, 0, mean, max(0.02, 5*meanErr))
		require.InDelta(t, 1, math.Sqrt(square), max(0.05, 5*squareErr/2))
		require.InDelta(t, 1, dark, max(0.02, 5*darkErr))
		require.Less(t, 5*squareErr/2, 0.05)
		require.Less(t, singular, sets)
	}
}

// Struck samples, some in every pixel, are restored one pixel at a time, beside lost
// rows as well: unbiased, with the variance that is said, flagged RESTORED. A pixel with
// more of them than a quarter of the dark columns keeps their reason as a flag.
func TestRestoreStruckSamples(t *testing.T) {
	const v, g, columns = 63, 16, 2000
	for _, lost := range [][]int{nil, {5, 40}} {
		c := newRepairCase(t, v, g, columns, lost)
		require.True(t, c.prepare(t))
		c.expose()
		want := 0
		for p := range columns {
			n := p % 4
			if p == 77 {
				n = 5
			}
			hit := 0
			for _, i := range c.draw.Perm(v) {
				if hit < n && !c.decoder.scale.isLost(i) {
					c.strip.slot(i)[p] = missing32
					hit++
				}
			}
			if n > 0 {
				c.strip.struck[p] = calib.Saturated
			}
			if n <= 4 {
				want += n
			}
		}
		sum, square, n, out, q := c.pulls()
		dependent := 0
		for p, f := range out.flags {
			switch {
			case len(lost) > 0 && p%4 == 3 && f == calib.Saturated:
				dependent++ // five of 63 rows, seen in 16 columns
				want -= 3
			case p == 77:
				require.Equal(t, calib.Saturated, f, "pixel %d", p)
			case p%4 > 0:
				require.Equal(t, int16(product.FlagRestored), f, "pixel %d lost %v", p, lost)
			default:
				require.Zero(t, f)
			}
		}
		require.Less(t, dependent, 10)
		require.Equal(t, want+len(lost)*columns, q.restored)
		// 2000 pixels whose 47 elements are nearly independent: 5 standard errors are
		// 0.016 of the mean and 0.012 of the rms.
		require.InDelta(t, 0, sum/float64(n), 0.02)
		require.InDelta(t, 1, math.Sqrt(square/float64(n)), 0.02, "lost %v", lost)
	}
}

// Slots of unequal depth are weighed where that gains more than 2 % of the variance, and
// the variance says what was gained; beside a lost row as well. Equal ones are not.
func TestUnequalDepth(t *testing.T) {
	const v, g, columns = 63, 16, 3000
	for _, lost := range [][]int{nil, {30}} {
		c := newRepairCase(t, v, g, columns, lost)
		slots := make([][]*exposure.Frame, v)
		for i := range slots {
			switch {
			case slices.Contains(lost, i):
			case i%2 == 0:
				slots[i] = []*exposure.Frame{{}}
			default:
				slots[i] = []*exposure.Frame{{}, {}, {}, {}, {}, {}}
			}
		}
		c.decoder.scale = newSlotScale(slots, nil)
		require.True(t, c.prepare(t))
		require.NotNil(t, c.decoder.repair.weights)
		plain, err := c.decoder.repair.restorer.Lost(lost, c.decoder.scale.quiet)
		require.NoError(t, err)
		require.Greater(t, plain.Growth/c.decoder.repair.weights.Growth, worthwhileGain)
		c.constant(900)
		sum, square, n, _, q := c.pulls()
		// As for struck samples; the elements of a pixel share part of their errors.
		require.InDelta(t, 0, sum/float64(n), 0.02)
		require.InDelta(t, 1, math.Sqrt(square/float64(n)), 0.02)
		require.InDelta(t, 1, q.dark.square/q.dark.variance, 0.03)
	}
	c := newRepairCase(t, v, g, columns, nil)
	require.True(t, c.prepare(t))
	require.Nil(t, c.decoder.repair.weights)
}

// constant draws samples of the same light in each step, which decodes to 1/k of itself
// and is what the elements are compared with; with it taken off as the level.
func (c *repairCase) constant(level float32) {
	d := c.decoder
	clear(c.light)
	for p := range d.columns {
		c.strip.off[p], c.strip.level[p] = level, level
	}
	for i := range d.slots {
		for p := range d.columns {
			frames := math.Sqrt(1 / max(d.scale.quiet[i], 1e-9))
			noise := math.Sqrt(float64(level)+repairReadNoise*repairReadNoise) / frames
			c.strip.slot(i)[p] = level + float32(noise*c.draw.NormFloat64())
		}
	}
}

// Without frames of the light that comes without open mirrors, the mean of the dark
// decodes stands for it, and lost rows are restored all the same.
func TestPedestalFromDarkColumns(t *testing.T) {
	const v, g, columns, pedestal = 63, 16, 3000, 500
	for _, lost := range [][]int{nil, {11}} {
		c := newRepairCase(t, v, g, columns, lost)
		for i := range c.steps {
			c.steps[i] += pedestal
		}
		checks, err := hadamard.NewChecks(c.decoder.code.Code(), c.dark)
		require.NoError(t, err)
		c.decoder.repair, err = newRepair(checks, c.decoder.elementColumns, &c.decoder.scale, true, true)
		require.NoError(t, err)
		c.expose()
		_, _, _, out, q := c.pulls()
		require.InDelta(t, 1, q.dark.square/q.dark.variance, 0.03)
		c.decoder.takePedestal(out, c.strip)
		var sum, square float64
		for e, j := range c.decoder.elementColumns {
			for p, v := range out.signal[e] {
				pull := (float64(v) - c.light[j]) / math.Sqrt(float64(out.variance[0][p]))
				sum += pull
				square += pull * pull
			}
		}
		n := float64(len(c.decoder.elementColumns) * columns)
		require.InDelta(t, 0, sum/n, 0.02)
		require.InDelta(t, 1, math.Sqrt(square/n), 0.02)
	}
}

func sorted(x []int) []int {
	slices.Sort(x)
	return x
}

// average gives a mean and its standard error.
func average(x []float64) (mean, err float64) {
	for _, v := range x {
		mean += v / float64(len(x))
	}
	for _, v := range x {
		err += (v - mean) * (v - mean)
	}
	return mean, math.Sqrt(err / float64(len(x)*(len(x)-1)))
}
