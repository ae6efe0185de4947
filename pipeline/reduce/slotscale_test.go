package reduce

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
)

// Frames of changing factor and offset, one, two or none a slot, decode to the light
// that they would show without, and the variance is that of each frame's own noise:
// read noise and the photons of what its pixel really held, both multiplied.
func TestCorrectionBeforeDecoding(t *testing.T) {
	const v, columns, leak = 15, 20, 0.9
	r := rand.New(rand.NewPCG(4, 1))
	c := newDecodeCase(t, hadamard.MSequence, v, columns, ones(v, 1))
	k := noCorrection(2 * v)
	k.leak = leak
	for i := range k.factor {
		k.factor[i] = 1 + 0.3*(r.Float64()-0.5)
		k.offset[i] = 10 * r.NormFloat64()
		k.variance[i] = 1e-3
	}
	var slots [][]*exposure.Frame
	for i := range v {
		slots = append(slots, []*exposure.Frame{{Step: i}})
		if i%4 == 1 {
			slots[i] = append(slots[i], &exposure.Frame{Step: v + i})
		}
	}
	d := c.decoder
	d.scale = newSlotScale(slots, k)
	d.photonExcess = 0.2
	light := make([]float64, v*columns)
	frame := make([]float32, columns)
	for i, frames := range slots {
		for p := range columns {
			light[i*columns+p] = 100 + 50*r.Float64()
			c.strip.off[p], c.strip.level[p] = leak*7, leak*7+2
		}
		for n, f := range frames {
			factor, offset, _ := k.of(f.Step)
			for p := range columns {
				frame[p] = float32((light[i*columns+p]+leak*7)/factor + offset + float64(c.strip.base[p]))
			}
			dst := c.strip.slot(i)
			accumulate(dst, frame, float32(factor), n == 0)
		}
		for p := range c.strip.slot(i) {
			c.strip.slot(i)[p] /= float32(len(frames))
		}
	}
	out, _ := c.run()
	for p := range columns {
		variance := float64(c.strip.levelVariance[p]) / (d.k * d.k)
		for i, frames := range slots {
			a, n := c.inverse.At(0, i), float64(len(frames))
			for _, f := range frames {
				factor, _, uncertain := k.of(f.Step)
				raw := (light[i*columns+p] + leak*7) / factor
				variance += a * a / (n * n) * (factor*factor*(c.strip.quiet[0][p]+1.2*(raw+2)) + uncertain*raw*raw)
			}
		}
		// Of the dark current's 2 e the factor is taken once, not squared.
		require.InEpsilon(t, variance, out.variance[0][p], 5e-3)
		for e, j := range d.elementColumns {
			want := 0.0
			for i := range v {
				want += c.inverse.At(j, i) * light[i*columns+p]
			}
			require.InDelta(t, want, out.signal[e][p], 2e-3, "column %d pixel %d", j, p)
		}
	}
}

// Nothing known changes nothing, and factors of 1 neither.
func TestSlotScaleOfNothing(t *testing.T) {
	slots := [][]*exposure.Frame{{{Step: 0}}, {}, {{Step: 1}, {Step: 2}}}
	plain := newSlotScale(slots, nil)
	require.Equal(t, plain, newSlotScale(slots, noCorrection(3)))
	require.Equal(t, []int{1}, plain.lost)
	require.Equal(t, []float64{1, 0, 0.5}, plain.light)
	require.InDelta(t, 1.5, plain.quietSum, 1e-15)
	var none *correction
	require.Equal(t, 1.0, none.leakFactor())
}
