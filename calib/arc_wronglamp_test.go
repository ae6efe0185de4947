package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// drawnFrames gives peaks of a lamp for elements 0, 10 and 20, twelve blocks each, as
// the geometry puts them, without a picture: lines are lost where another is within
// 1.2 FWHM.
func drawnFrames(g Geometry, lamp, listed []LampLine, random *rand.Rand) []ArcFrame {
	var frames []ArcFrame
	for _, j := range []int{0, 10, 20} {
		f := ArcFrame{Element: j, Lines: listed}
		for b := range 12 {
			for i, l := range lamp {
				alone := true
				for k, o := range lamp {
					alone = alone && (i == k || math.Abs(l.VacuumNM-o.VacuumNM)*2 > 1.2*3.4)
				}
				q := 8*float64(b) + 3.5 - g.Y_c
				x := g.X_c + g.X_e*(float64(j)-g.J_c) + g.disperse(l.VacuumNM-g.L_c) + q*(g.SlitTilt+g.Smile*q) + 0.01*random.NormFloat64()
				if alone && x > 5 && x < 315 {
					f.Peaks = append(f.Peaks, Peak{FirstRow: 8 * b, LastRow: 8*b + 7, X: x, XErr: 0.01, FWHM: 3.4, FWHMErr: 0.02, Flux: 1e4, FluxErr: 100})
				}
			}
		}
		frames = append(frames, f)
	}
	return frames
}

func drawnLamp(random *rand.Rand, n int) []LampLine {
	lines := make([]LampLine, n)
	for i := range lines {
		lines[i] = LampLine{545 + 130*random.Float64(), math.Exp(random.NormFloat64())}
	}
	return lines
}

// Random lamps of 6 to 20 lines: a wrong list is never recognized. The right one is,
// in spite of a tenth of missing and a twentieth of unknown lines, where 5 lines stand
// clear of others, and then the solution is as good as it says.
func TestWrongLamps(t *testing.T) {
	random := rand.New(rand.NewPCG(8, 8))
	nominal, s := smallArc(1)
	s.g.TraceTilt, s.g.TraceCurve = 0, 0
	rule := DefaultArcRule(540, 680, 3.4)
	const trials = 60
	for _, n := range []int{6, 8, 12, 16, 20} {
		solved := 0
		for range trials {
			list := drawnLamp(random, n)
			lamp := append(append([]LampLine(nil), list[:n-(n+5)/10]...), drawnLamp(random, (n+10)/20)...)
			var arc *ArcError
			_, err := SolveArcs(nominal, drawnFrames(s.g, lamp, drawnLamp(random, n), random), rule)
			require.ErrorAs(t, err, &arc)
			r, err := SolveArcs(nominal, drawnFrames(s.g, lamp, list, random), rule)
			if err != nil {
				require.ErrorAs(t, err, &arc)
				continue
			}
			solved++
			for _, nm := range []float64{550, 580, 610, 640, 670} {
				require.Less(t, worstMiss(r.Geometry, s.g, 21, 96, nm, nm), 0.01+6*max(r.ErrorPx(0, 0, nm), r.ErrorPx(20, 95, nm)))
			}
		}
		t.Logf("%d lines: %d of %d lamps recognized", n, solved, trials)
		if n >= 12 {
			require.Greater(t, solved, trials*8/10)
		}
	}
}
