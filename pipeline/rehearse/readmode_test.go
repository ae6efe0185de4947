package rehearse

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
)

// Rows of 300 electrons a pixel have the read mode's variance Read R^2 + Photon 300,
// figures worked by hand from Garnett and Forrest (1993, Proceedings of SPIE 1946,
// 395): N = 20000 pixels, five standard errors of a variance.
func TestReadModeNoise(t *testing.T) {
	const columns, rows, light, noise, gain = 1000, 20, 300.0, 10.0, 2.0
	for _, c := range []struct {
		mode         *instrument.ReadMode
		read, photon float64
	}{
		{nil, 1, 1},
		{&instrument.ReadMode{Kind: instrument.SingleRead}, 1, 1},
		{&instrument.ReadMode{Kind: instrument.DoubleRead}, 2, 1},
		{&instrument.ReadMode{Kind: instrument.FowlerRead, Reads: 8, Spacing: 0.1}, 0.25, 1 - 0.1*63/24},
		{&instrument.ReadMode{Kind: instrument.RampRead, Reads: 16}, 12 * 15.0 / (16 * 17), 6 * 257.0 / (5 * 16 * 17)},
	} {
		d := instrument.Detector{Columns: columns, Rows: rows, SaturationADU: 60000, ReadMode: c.mode, Amplifiers: []instrument.Amplifier{
			{Data: instrument.Section{1, columns, 1, rows}, GainEPerADU: gain, ReadNoiseE: noise, BiasADU: 1000},
		}}
		n := newDetector(d, 7, true, false)
		clear(n.dead)
		r, raw := n.newReader(), make([]float64, columns)
		var sum, square float64
		for y := range rows {
			mean := make([]float64, columns)
			for x := range mean {
				mean[x] = light
			}
			r.read(raw, y, mean, &reading{pattern: make([]float64, columns), before: make([]float64, columns)})
			for _, v := range raw {
				e := (v - 1000) * gain
				sum += e / (columns * rows)
				square += e * e / (columns * rows)
			}
		}
		want := c.read*noise*noise + c.photon*light
		require.InDelta(t, light, sum, 5*math.Sqrt(want/(columns*rows)), "%+v", d.Mode())
		require.InEpsilon(t, want, square-sum*sum, 5*math.Sqrt(2.0/(columns*rows)), "%+v", d.Mode())
	}
}
