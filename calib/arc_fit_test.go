package calib

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// fitTruth is the model's parameters of a test, in the fit's own units.
var fitTruth = [fitParameters]float64{3, 2, 180, 4, -1.5, 0.012, 3e-4}

// drawFit makes measurements of lines at u, off by lineDev in common, for 4 elements
// and 6 blocks of rows.
func drawFit(random *rand.Rand, u []float64, lineDev, err float64) *arcFit {
	nominal := Geometry{X_e: 2, D: [3]float64{1.8, 4e-4, -1.5e-6}, SlitTilt: 0.01, Smile: 2e-4}
	f := &arcFit{prior: newPrior(&nominal, 100), lines: len(u), u: u}
	for k, v := range u {
		off := lineDev * random.NormFloat64()
		for j := -15.0; j <= 15; j += 10 {
			for q := -50.0; q <= 50; q += 20 {
				m := measurement{row: [fitParameters]float64{1, j, v, v * v, v * v * v, q, q * q}, line: k, err2: err * err}
				for i, r := range m.row {
					m.value += r * fitTruth[i]
				}
				m.value += off + err*random.NormFloat64()
				f.data = append(f.data, m)
			}
		}
	}
	return f
}

var fitLines = []float64{-0.95, -0.8, -0.62, -0.41, -0.3, -0.05, 0.12, 0.33, 0.5, 0.61, 0.84, 0.97}

// The normal equations, against numpy with the whole covariance matrix.
func TestCrosscheckArcLeastSquares(t *testing.T) {
	f := drawFit(rand.New(rand.NewPCG(1, 1)), []float64{-0.9, -0.3, 0.2, 0.45, 0.8}, 0.02, 0.01)
	f.extraVar, f.lineVar, f.dropped = 3e-4, 2e-4, make([]bool, f.lines)
	var rows, priorRows [][fitParameters]float64
	var values, err2, priorValues, priorDev []float64
	var lines []int
	for i := range f.data {
		d := &f.data[i]
		d.weight = 1
		rows, values, err2, lines = append(rows, d.row), append(values, d.value), append(err2, d.err2), append(lines, d.line)
	}
	for _, p := range f.prior {
		priorRows, priorValues, priorDev = append(priorRows, p.row), append(priorValues, p.value), append(priorDev, p.dev)
	}
	require.True(t, f.leastSquares())
	var want struct {
		P   []float64
		Cov [][]float64
	}
	var args []string
	for _, v := range []any{rows, values, err2, lines, f.extraVar, f.lineVar, priorRows, priorValues, priorDev} {
		args = append(args, jsonText(t, v))
	}
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_arcs.py", append([]string{"gls"}, args...)...)), &want))
	for i, p := range want.P {
		err := math.Sqrt(want.Cov[i][i])
		require.InDelta(t, p, f.p.AtVec(i), 1e-6*err)
		for k, c := range want.Cov[i] {
			require.InDelta(t, c, f.cov.At(i, k), 1e-6*err*math.Sqrt(want.Cov[k][k]))
		}
	}
}

// The errors claimed at the ends of the band are those made: 400 fits, lines off by
// 0.02 px each.
func TestArcFitErrors(t *testing.T) {
	random := rand.New(rand.NewPCG(2, 2))
	const trials = 400
	var sum2, lineVar float64
	for range trials {
		f := drawFit(random, fitLines, 0.02, 0.005)
		require.True(t, f.solve())
		at := [fitParameters]float64{1, 10, 1, 1, 1, 30, 900}
		variance, miss := 0.0, dotRow(&at, f.p)
		for i, a := range at {
			miss -= a * fitTruth[i]
			for k, b := range at {
				variance += a * b * f.cov.At(i, k)
			}
		}
		sum2 += miss * miss / variance
		lineVar += f.lineVar
	}
	t.Logf("pull std %.3f, line error %.4f px", math.Sqrt(sum2/trials), math.Sqrt(lineVar/trials))
	// The line error is estimated from 12 lines less 4 parameters: pulls follow
	// Student's t of 8 degrees, of std sqrt(8/6) = 1.155. 5 standard errors of a std
	// from 400 samples are 0.2.
	require.InDelta(t, 1.155, math.Sqrt(sum2/trials), 0.2)
	require.InDelta(t, 0.02, math.Sqrt(lineVar/trials), 0.003)
}

// Centroids that are far off, and lines that are, have no say.
func TestArcFitOutliers(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 3))
	for range 20 {
		f := drawFit(random, fitLines, 0.002, 0.005)
		for i := range f.data {
			d := &f.data[i]
			switch {
			case d.line == 3:
				d.value += 0.2
			case d.line == 7:
				d.value -= 0.08
			case i%11 == 0:
				d.value += 2*random.Float64() - 1
			}
		}
		require.True(t, f.solve())
		for k, dropped := range f.dropped {
			require.Equal(t, k == 3 || k == 7, dropped, "line %d", k)
		}
		for _, at := range [][fitParameters]float64{{1, 15, 1, 1, 1, 50, 2500}, {1, -15, -1, 1, -1, -50, 2500}} {
			miss := dotRow(&at, f.p)
			for i, a := range at {
				miss -= a * fitTruth[i]
			}
			require.InDelta(t, 0, miss, 0.02)
		}
	}
}

// Stray lines among few and many, at the ends and in the bulk.
func TestStrayLines(t *testing.T) {
	random := rand.New(rand.NewPCG(4, 4))
	for _, c := range []struct {
		u     []float64
		off   map[int]float64
		stray []int
	}{
		{u: fitLines},
		{fitLines, map[int]float64{5: 0.15}, []int{5}},
		{fitLines, map[int]float64{0: 0.3, 1: -0.2, 5: 0.1, 9: 0.1}, []int{0, 1, 5, 9}},
		// A far line that nothing contradicts is believed.
		{append([]float64{-3}, fitLines[6:]...), map[int]float64{0: 0.3}, nil},
		// Too few to tell.
		{fitLines[:6], map[int]float64{2: 0.3}, nil},
	} {
		places := make([]linePlace, len(c.u))
		for i, u := range c.u {
			places[i] = linePlace{line: i, u: u, mean: 0.5 - 2*u + 0.3*u*u*u + 0.002*random.NormFloat64() + c.off[i], variance: 1e-6}
		}
		stray, _ := strayLines(places)
		var got []int
		for i, s := range stray {
			if s {
				got = append(got, i)
			}
		}
		require.Equal(t, c.stray, got)
	}
}

func TestExcess(t *testing.T) {
	require.Zero(t, excess(nil, nil))
	require.Zero(t, excess([]float64{0.1, 0.2, 0.1}, []float64{1, 1, 1}))
	random := rand.New(rand.NewPCG(5, 5))
	value, err2 := make([]float64, 4001), make([]float64, 4001)
	for i := range value {
		err2[i] = 0.01 * (1 + random.Float64())
		value[i] = math.Abs(random.NormFloat64()) * math.Sqrt(err2[i]+0.04)
	}
	require.InDelta(t, 0.04, excess(value, err2), 0.005)
}
