package calib

import (
	"errors"
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

// Pictures, not drawn peaks: all identified, below 0.05 px at every element and row,
// with the widths and numbers that belong to it.
func TestSolveArcsFarFromNominal(t *testing.T) {
	for seed := range uint64(3) {
		nominal, s := smallArc(seed)
		r, err := solveScene(t, nominal, s, neon(), shine(neon(), s.random, 545, 675), 0, 5, 10, 15, 20)
		require.NoError(t, err)
		worst := worstMiss(r.Geometry, s.g, 21, 96, 545, 672)
		t.Logf("%v; lines %.4f px; worst %.4f px; width %.3f px", r, r.LineErrorPx, worst, r.Width.FWHMPx(610))
		require.Less(t, worst, 0.05)
		require.InDelta(t, 14, r.Match.ShiftPx, 0.1)
		require.InDelta(t, -0.018, r.Match.Scale, 1e-3)
		// Two mirrors 1 px apart: the variance of the spot and a quarter.
		require.InDelta(t, math.Sqrt(3.2*3.2+sigmasPerFWHM*sigmasPerFWHM/4), r.Width.FWHMPx(610), 0.03)
		requireCounts(t, r)
	}
}

// requireCounts holds the solution's numbers against its own table.
func requireCounts(t *testing.T, r *ArcSolution) {
	kept, byLine := 0, map[float64]bool{}
	for _, d := range r.Residuals {
		if d.Kept {
			kept++
			byLine[d.VacuumNM] = true
		}
	}
	require.Equal(t, r.Used, kept)
	require.Len(t, r.Residuals, r.Used+r.Rejected)
	require.Len(t, byLine, r.Lines)
	// Element 3 is nearest to the frame of 5, row 0 to the first block.
	used, rejected, rms := r.LinesAt(3, 0)
	wantUsed, wantRejected, first := 0, 0, 1000
	for _, d := range r.Residuals {
		first = min(first, d.FirstRow)
	}
	for _, d := range r.Residuals {
		switch {
		case d.Element != 5 || d.FirstRow != first:
		case d.Kept:
			wantUsed++
		default:
			wantRejected++
		}
	}
	require.Equal(t, []int{wantUsed, wantRejected}, []int{used, rejected})
	require.Less(t, rms, 0.1)
	require.Positive(t, used)
}

// What leaves the nominal solution standing is a typed error, what is the caller's
// fault is not.
func TestSolveArcsRefuses(t *testing.T) {
	nominal, s := smallArc(9)
	var arc *ArcError
	_, err := solveScene(t, nominal, s, neon(), nil, 0, 10, 20) // the lamp was off
	require.ErrorAs(t, err, &arc)
	require.ErrorContains(t, err, "no line was seen")
	_, err = solveScene(t, nominal, s, nil, shine(neon(), s.random, 545, 675), 10)
	require.ErrorAs(t, err, &arc)
	_, err = SolveArcs(nominal, nil, DefaultArcRule(540, 680, 3.4))
	require.ErrorAs(t, err, &arc)
	for _, rule := range []ArcRule{{}, DefaultArcRule(680, 540, 3.4), DefaultArcRule(540, 680, 0), DefaultArcRule(540, math.NaN(), 3)} {
		_, err = SolveArcs(nominal, nil, rule)
		require.ErrorContains(t, err, "allow no fit")
		require.False(t, errors.As(err, &arc))
	}
	_, err = SolveArcs(Geometry{}, nil, DefaultArcRule(540, 680, 3.4))
	require.ErrorContains(t, err, "allow no fit")
}

// Cosmic rays, of 100 to 20000 e in 1 % of the pixels, move nothing.
func TestSolveArcsUnderCosmicRays(t *testing.T) {
	nominal, s := smallArc(12)
	lamp := shine(neon(), s.random, 545, 675)
	first, last := s.litRows()
	fwhm := LineFWHM(3.2, nominal.X_e)
	var frames []ArcFrame
	for _, j := range []int{0, 10, 20} {
		e := s.expose(s.light(j, lamp))
		for range len(e.Signal) / 300 {
			at, charge := s.random.IntN(len(e.Signal)-3), float32(100*math.Pow(200, s.random.Float64()))
			for i := range 1 + s.random.IntN(3) { // along the row: the worst for a line
				e.Signal[at+i] += charge
				e.Variance[at+i] += charge
			}
		}
		peaks, err := DefaultPeakRule(fwhm).Find(e, first, last)
		require.NoError(t, err)
		frames = append(frames, ArcFrame{Element: j, Lines: neon(), Peaks: peaks})
	}
	r, err := SolveArcs(nominal, frames, DefaultArcRule(540, 680, fwhm))
	require.NoError(t, err)
	worst := worstMiss(r.Geometry, s.g, 21, 96, 545, 672)
	t.Logf("%v; worst %.4f px", r, worst)
	require.Less(t, worst, 0.05)
}

// Wavelengths that fall along x, elements that fall along x, and a single element:
// the model where it was measured, and an honest error where it was not.
func TestSolveArcsTurned(t *testing.T) {
	random := rand.New(rand.NewPCG(21, 21))
	for _, c := range []struct {
		name       string
		wave, step float64
		frames     int
	}{{"as is", 1, 1, 3}, {"wavelength falls", -1, 1, 3}, {"elements fall", 1, -1, 3}, {"one element", 1, 1, 1}} {
		t.Run(c.name, func(t *testing.T) {
			nominal, s := smallArc(1)
			turn := func(g *Geometry) {
				for i := range g.D {
					g.D[i] *= c.wave
				}
				g.X_e *= c.step
				g.TraceTilt, g.TraceCurve = 0, 0
			}
			turn(&nominal)
			turn(&s.g)
			frames := drawnFrames(s.g, neon(), neon(), random)[:c.frames]
			r, err := SolveArcs(nominal, frames, DefaultArcRule(540, 680, 3.4))
			require.NoError(t, err)
			require.Less(t, worstMiss(r.Geometry, s.g, 1, 96, 545, 672), 0.05) // element 0
			require.Less(t, r.ErrorPx(0, 50, 610), 0.02)
			require.Less(t, worstMiss(r.Geometry, s.g, 21, 96, 545, 672), 0.05+5*r.ErrorPx(20, 50, 610))
			if c.frames == 1 {
				require.Greater(t, r.ErrorPx(20, 50, 610), 0.2) // 1 % of 20 elements of 2 px
			}
		})
	}
}
