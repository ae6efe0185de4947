package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// smallArc is a night in miniature, far off nominal: 14 px, -1.8 %, a degree of tilt,
// 3 px of smile, traces tilted by 5 px.
func smallArc(seed uint64) (nominal Geometry, s *lampScene) {
	nominal = Geometry{X_c: 159.5, Y_c: 47.5, X_e: 2, J_c: 10, L_c: 610, D: [3]float64{2, 3e-4, -2e-6}, SlitTilt: 0.01, Smile: 1e-4}
	g := nominal
	g.X_c += 14
	for i := range g.D {
		g.D[i] *= 0.982
	}
	g.X_e *= 1.001
	g.SlitTilt -= 0.0175
	g.Smile += 3.0 / (48 * 48)
	g.TraceTilt, g.TraceCurve = 5.0/320, 1e-5
	s = &lampScene{g: g, columns: 320, rows: 96, mirrorRows: 78, wStep: 1.02, mirrors: 2, fwhm: 3.2, read: 4, pedestal: 15, unequal: 0.01,
		random: rand.New(rand.NewPCG(seed, 1))}
	return nominal, s
}

// shine turns a list into a real lamp: lacking a tenth, with unknown lines,
// intensities off by up to three.
func shine(lines []LampLine, random *rand.Rand, firstNM, lastNM float64) []sceneLine {
	var lamp []sceneLine
	for i, l := range lines {
		if i%10 != 4 {
			lamp = append(lamp, sceneLine{l.VacuumNM, l.Intensity * math.Pow(3, 2*random.Float64()-1)})
		}
	}
	for range max(1, len(lines)/20) {
		lamp = append(lamp, sceneLine{firstNM + random.Float64()*(lastNM-firstNM), 2000})
	}
	return lamp
}

func solveScene(t *testing.T, nominal Geometry, s *lampScene, lines []LampLine, lamp []sceneLine, elements ...int) (*ArcSolution, error) {
	fwhm := LineFWHM(3.2, nominal.X_e)
	first, last := s.litRows()
	var frames []ArcFrame
	for _, j := range elements {
		peaks, err := DefaultPeakRule(fwhm).Find(s.expose(s.light(j, lamp)), first, last)
		require.NoError(t, err)
		frames = append(frames, ArcFrame{Element: j, Lines: lines, Peaks: peaks})
	}
	return SolveArcs(nominal, frames, DefaultArcRule(540, 680, fwhm))
}

// worstMiss compares two mappings over the detector on detector rows.
func worstMiss(got, want Geometry, elements, rows int, firstNM, lastNM float64) float64 {
	straight := func(g Geometry, j, y, nm float64) float64 {
		l, q := nm-g.L_c, y-g.Y_c
		return g.X_c + g.X_e*(j-g.J_c) + g.D[0]*l + g.D[1]*l*l + g.D[2]*l*l*l + g.SlitTilt*q + g.Smile*q*q
	}
	worst := 0.0
	for j := range elements {
		for y := range rows {
			for nm := firstNM; nm <= lastNM; nm++ {
				worst = max(worst, math.Abs(straight(got, float64(j), float64(y), nm)-straight(want, float64(j), float64(y), nm)))
			}
		}
	}
	return worst
}

func TestSolveArcsFarFromNominal(t *testing.T) {
	for seed := range uint64(4) {
		nominal, s := smallArc(seed)
		r, err := solveScene(t, nominal, s, neon(), shine(neon(), s.random, 545, 675), 0, 5, 10, 15, 20)
		require.NoError(t, err)
		worst := worstMiss(r.Geometry, s.g, 21, 96, 545, 672)
		t.Logf("%v; match %+v; line %.4f extra %.4f; worst %.4f px; width %.3f (%.3f)", r, r.Match, r.LineErrorPx, r.ExtraErrorPx, worst, r.Width.FWHMPx(610), r.Width.RMSPx)
		require.Less(t, worst, 0.05)
	}
}
