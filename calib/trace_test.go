package calib

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// traceScene is an evenly lit device: at every column the rows first..last of mirrors,
// wStep apart about Y_c, each a Gaussian along y at its trace.
func traceScene(g Geometry, columns, rows int, first, last, wStep, level float64, random *rand.Rand) Exposure {
	const sigma = 3.2 / 2.354820045
	e := Exposure{Columns: columns, Signal: make([]float32, columns*rows), Variance: make([]float32, columns*rows), Flags: make([]Flag, columns*rows)}
	for x := range columns {
		d := float64(x) - g.X_c
		trace := g.TraceTilt*d + g.TraceCurve*d*d
		shine := level * (1 + 0.3*math.Sin(float64(x)/40))
		for y := range rows {
			light := 20.0 // pedestal
			for w := first; w <= last; w++ {
				at := g.Y_c + wStep*w + trace
				if math.Abs(float64(y)-at) < 8 {
					light += shine * wStep / 2 * (math.Erf((float64(y)+0.5-at)/sigma/math.Sqrt2) - math.Erf((float64(y)-0.5-at)/sigma/math.Sqrt2))
				}
			}
			light *= 1 + 0.01*random.NormFloat64() // unequal pixels
			noise := math.Sqrt(light + 16)
			e.Signal[y*columns+x], e.Variance[y*columns+x] = float32(light+noise*random.NormFloat64()), float32(light+16)
		}
	}
	return e
}

// traceMiss is the worst difference of two traces over the detector.
func traceMiss(s *TraceSolution, g Geometry, columns int) float64 {
	worst := 0.0
	for x := range columns {
		d := float64(x) - g.X_c
		worst = max(worst, math.Abs(d*(s.TraceTilt-g.TraceTilt+d*(s.TraceCurve-g.TraceCurve))))
	}
	return worst
}

func tracedGeometry() (nominal, truth Geometry) {
	nominal = Geometry{X_c: 159.5, Y_c: 47.5, X_e: 2, L_c: 600, D: [3]float64{2}, TraceTilt: 0.002, TraceCurve: 5e-6}
	truth = nominal
	truth.TraceTilt += 5.0 / 320
	truth.TraceCurve += 2e-5
	return nominal, truth
}

// Both ends, one end, and points spoiled by cosmic rays, a dead column and a bright
// star: the trace to a hundredth of a pixel, and errors that own up to it.
func TestTrace(t *testing.T) {
	nominal, truth := tracedGeometry()
	random := rand.New(rand.NewPCG(1, 1))
	lower, upper := RowEnd{47.5 - 1.02*34.5, true}, RowEnd{47.5 + 1.02*34.5, false}
	for _, c := range []struct {
		name  string
		ends  []RowEnd
		spoil bool
	}{{"both", []RowEnd{lower, upper}, false}, {"lower", []RowEnd{lower}, false}, {"upper", []RowEnd{upper}, false}, {"spoiled", []RowEnd{lower, upper}, true}} {
		t.Run(c.name, func(t *testing.T) {
			var pulls float64
			const trials = 10
			for range trials {
				e := traceScene(truth, 320, 96, -34, 34, 1.02, 3000, random)
				if c.spoil {
					spoilTrace(&e, random)
				}
				points, err := DefaultTraceRule(3.2).Find(e, c.ends, 4)
				require.NoError(t, err)
				s, err := FitTrace(nominal, points, 320)
				require.NoError(t, err)
				require.Less(t, traceMiss(s, truth, 320), 0.03)
				require.InDelta(t, 0, s.OffsetPx, 0.02)
				if len(c.ends) == 2 {
					require.InDelta(t, 1, s.PlateScale, 5*s.PlateScaleErr+5e-4)
				} else {
					require.True(t, math.IsNaN(s.PlateScale))
				}
				d := 319 - nominal.X_c
				pull := d * (s.TraceTilt - truth.TraceTilt + d*(s.TraceCurve-truth.TraceCurve)) / s.ErrorPx(&nominal, 319)
				pulls += pull * pull / trials
			}
			t.Logf("pulls at the last column: %.2f rms", math.Sqrt(pulls))
			require.Less(t, math.Sqrt(pulls), 2.2) // 10 samples: 5 standard errors above 1
		})
	}
}

// spoilTrace adds cosmic rays, a dead column, a trail of a bright pixel.
func spoilTrace(e *Exposure, random *rand.Rand) {
	for range len(e.Signal) / 400 {
		e.Signal[random.IntN(len(e.Signal))] += 20000
	}
	for y := range e.Rows() {
		e.Flags[y*e.Columns+77] |= BadPixel
		e.Signal[y*e.Columns+77] = float32(math.NaN())
		e.Signal[y*e.Columns+200] += 30000
	}
}

// Elements that end at rows of their own, as on a device turned by 45 degrees: a
// common trace, a constant for each end.
func TestTraceOfDiamond(t *testing.T) {
	nominal, truth := tracedGeometry()
	random := rand.New(rand.NewPCG(2, 2))
	var points []EdgePoint
	for j := range 6 {
		half := float64(34 - 3*j)
		e := traceScene(truth, 320, 96, -half, half, 1, 800, random)
		ends := []RowEnd{{47.5 - half - 0.5, true}, {47.5 + half + 0.5, false}}
		p, err := DefaultTraceRule(3.2).Find(e, ends, 2*j)
		require.NoError(t, err)
		points = append(points, p...)
	}
	s, err := FitTrace(nominal, points, 320)
	require.NoError(t, err)
	require.Less(t, traceMiss(s, truth, 320), 0.02)
	require.InDelta(t, 1, s.PlateScale, 1e-3)
	require.Less(t, s.RMSPx, 0.1)
}

// Lines of an arc show their element's ends at a few columns each.
func TestTraceOfArcs(t *testing.T) {
	nominal, s := smallArc(3)
	var points []EdgePoint
	half := 1.02 * 78 / 2
	for _, j := range []int{0, 10, 20} {
		e := s.expose(s.light(j, shine(neon(), s.random, 545, 675)))
		p, err := DefaultTraceRule(3.2).Find(e, []RowEnd{{47.5 - half, true}, {47.5 + half, false}}, 2*j)
		require.NoError(t, err)
		points = append(points, p...)
	}
	r, err := FitTrace(nominal, points, 320)
	require.NoError(t, err)
	// The scene's trace is about its own X_c; about the nominal one it is steeper.
	want := s.g
	want.X_c = nominal.X_c
	want.TraceTilt -= 2 * want.TraceCurve * 14
	worst := traceMiss(r, want, 320)
	t.Logf("%d points, rms %.3f px, worst %.4f px", r.Used, r.RMSPx, worst)
	require.Less(t, worst, 0.05)
}

func TestTraceRefuses(t *testing.T) {
	nominal, truth := tracedGeometry()
	random := rand.New(rand.NewPCG(3, 3))
	var trace *TraceError
	// The device is longer than the detector: its ends are not seen.
	e := traceScene(truth, 320, 96, -80, 80, 1, 3000, random)
	points, err := DefaultTraceRule(3.2).Find(e, []RowEnd{{-33, true}, {128, false}}, 0)
	require.NoError(t, err)
	require.Empty(t, points)
	_, err = FitTrace(nominal, points, 320)
	require.ErrorAs(t, err, &trace)
	require.ErrorContains(t, err, "no end of the lit rows")
	// Dark: noise has no ends.
	points, err = DefaultTraceRule(3.2).Find(traceScene(truth, 320, 96, -34, 34, 1.02, 0, random), []RowEnd{{12.3, true}, {82.7, false}}, 0)
	require.NoError(t, err)
	require.Empty(t, points)
	// Too short a stretch.
	for x := range 20 {
		points = append(points, EdgePoint{X: 100 + float64(x), Y: 12, YErr: 0.01})
	}
	_, err = FitTrace(nominal, points, 320)
	require.ErrorAs(t, err, &trace)
	// The caller's faults.
	_, err = TraceRule{}.Find(e, nil, 0)
	require.ErrorContains(t, err, "width of 0 px")
	_, err = DefaultTraceRule(3.2).Find(Exposure{Columns: 3}, nil, 0)
	require.ErrorContains(t, err, "rows of 3 pixels")
	require.False(t, errors.As(err, &trace))
}
