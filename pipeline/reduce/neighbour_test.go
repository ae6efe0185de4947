package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"

	"mirrorloom/calib"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/instrument"
)

// A term that the lamp shows by less than 3 of its errors, or not at all, is not
// corrected.
func TestNeighbourTermIsSignificant(t *testing.T) {
	seq := smallSequence(t, instrument.Square, nil)
	code, err := hadamard.New(hadamard.MSequence, seq.V)
	require.NoError(t, err)
	d := &decoder{code: hadamard.NewDecoder(code), columns: testColumns, slots: seq.V, elementColumns: seq.ElementColumns(), k: float64(code.K())}
	for _, c := range []struct {
		value float64
		there bool
	}{{0.01, true}, {0.0031, true}, {0.0029, false}, {-0.01, false}} {
		o := &optics{geometry: nominalGeometry(seq), neighbour: &calib.ColourTerm{
			CenterNM: nominalGeometry(seq).L_c, Coef: []float64{c.value, 0}, Covariance: mat.NewSymDense(2, []float64{1e-6, 0, 0, 1e-8}),
		}}
		term, err := o.neighbourTerm(d)
		require.NoError(t, err)
		require.Equal(t, c.there, term != nil, "%+v", c)
	}
	term, err := new(optics).neighbourTerm(d)
	require.NoError(t, err)
	require.Nil(t, term)
}

// Steps are made from section 3 of the design, with d growing along the spectrum; after
// the correction less than d^2 of the brightest element is left anywhere.
func TestNeighbourCorrection(t *testing.T) {
	seq := smallSequence(t, instrument.Square, nil)
	code, err := hadamard.New(hadamard.MSequence, seq.V)
	require.NoError(t, err)
	columns := seq.ElementColumns()
	d := &decoder{code: hadamard.NewDecoder(code), columns: 1, slots: seq.V, elementColumns: columns, k: float64(code.K())}
	g := nominalGeometry(seq)
	const size, slope, x, y = 0.02, 2e-4, 19, 12
	o := &optics{geometry: g, neighbour: &calib.ColourTerm{CenterNM: g.L_c, Coef: []float64{size, slope}, Covariance: mat.NewSymDense(2, []float64{1e-8, 0, 0, 1e-12})}}
	term, err := o.neighbourTerm(d)
	require.NoError(t, err)

	light := make([]float64, len(columns))
	for j := range light {
		light[j] = 100 + 900*float64(j%3)
	}
	at := func(j int) float64 { // d at the wavelength that element j has in the pixel
		return size + slope*(g.Wavelength(x, float64(j), y-g.TraceShift(x))-g.L_c)
	}
	steps, decoded := make([]float32, seq.V), make([]float32, seq.V)
	for i := range steps {
		row, sum := code.Row(i), 0.0
		for j, c := range columns {
			sum += float64(row[c]) * light[j]
			if j+1 < len(columns) && row[c] == 1 && row[columns[j+1]] == 1 {
				sum += (at(j)*light[j] + at(j+1)*light[j+1]) / 2
			}
		}
		steps[i] = float32(sum)
	}
	d.code.Decode(decoded, steps, 1, 1)
	w := &decodeWorker{decoded: decoded, size: make([]float32, 1), slope: make([]float32, 1)}
	worst := func() (worst float64) {
		want := make([]float64, seq.V)
		for j, c := range columns {
			want[c] = light[j]
		}
		for c, v := range w.decoded {
			worst = max(worst, abs(float64(v)-want[c]))
		}
		return worst
	}
	before := worst()
	require.Greater(t, before, 0.2*size*1000, "the term is there")
	term.sizes(w.size, w.slope, x, y, 1)
	term.pairs.Correct(w.decoded, w.size, w.slope, 1, 1)
	require.Less(t, worst(), 2*size*size*1000*2)
	require.Less(t, worst(), before/10)
}

func abs(x float64) float64 { return max(x, -x) }
