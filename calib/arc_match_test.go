package calib

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// Lines nearer than 1.2 FWHM are one feature; a line is clean where those nearer than
// 1.5 cannot move it by more than a hundredth of a pixel.
func TestFeatures(t *testing.T) {
	lines := []LampLine{{603, 1}, {600, 1}, {601, 1}, {610, 1}, {611, 1e-5}, {620, 1}, {620.001, 1}, {630, 1}, {632, 1}}
	got := features(lines, 2, 3) // 1.2 and 1.5 FWHM are 1.8 and 2.25 nm
	require.Len(t, got, 6)
	require.Equal(t, feature{nm: 600.5}, got[0])
	require.Equal(t, feature{nm: 603}, got[1]) // 601 disturbs it
	require.Equal(t, feature{nm: 610, clean: true}, got[2])
	require.InDelta(t, 620, got[3].nm, 0.001)
	require.True(t, got[3].clean)
	require.Equal(t, []feature{{nm: 630}, {nm: 632}}, got[4:])
	require.Empty(t, features(nil, 2, 3))
}

// matchOf runs the vote for single tracks at x in some frames.
func matchOf(lines []LampLine, x map[int][]float64, nominal Geometry) (ArcMatch, error) {
	m := matcher{nominal: &nominal, rule: DefaultArcRule(540, 680, 3.4)}
	frame := 0
	for element := range 30 {
		at, ok := x[element]
		if !ok {
			continue
		}
		for _, v := range at {
			m.tracks = append(m.tracks, track{frame: frame, element: element, x: v})
		}
		m.features = append(m.features, features(lines, 2, 3.4))
		frame++
	}
	m.frames = frame
	return m.match()
}

var matchNominal = Geometry{X_c: 159.5, X_e: 2, J_c: 10, L_c: 610, D: [3]float64{2, 3e-4, -2e-6}}

// seen puts a list's lines where a shift and a scale say, those within the detector.
func seen(lines []LampLine, element int, shift, scale float64) []float64 {
	g := &matchNominal
	var x []float64
	for _, f := range features(lines, 2, 3.4) {
		if at := g.X_c + g.X_e*(float64(element)-g.J_c) + shift + (1+scale)*g.disperse(f.nm-g.L_c); at > 4 && at < 315 {
			x = append(x, at)
		}
	}
	return x
}

// Over the whole range of shifts and scales, with a third of the lines missing and as
// many unknown ones, intensities playing no part.
func TestMatchFindsShiftAndScale(t *testing.T) {
	random := rand.New(rand.NewPCG(6, 6))
	within := func(limit float64) float64 { return limit * (2*random.Float64() - 1) }
	rival := 0.0
	for range 40 {
		shift, scale := within(15), within(0.02)
		x := map[int][]float64{}
		for element := 0; element <= 20; element += 10 {
			for i, at := range seen(neon(), element, shift, scale) {
				switch i % 3 {
				case 0:
					x[element] = append(x[element], 20+280*random.Float64())
				default:
					x[element] = append(x[element], at+within(0.1))
				}
			}
		}
		m, err := matchOf(neon(), x, matchNominal)
		require.NoError(t, err, "%+v", m)
		// The line farthest from L_c is 128 px off.
		require.InDelta(t, shift, m.ShiftPx, 0.2)
		require.InDelta(t, scale, m.Scale, 0.2/120)
		rival = max(rival, m.Second/m.Score)
	}
	t.Logf("the second best match explains at most %.2f of what the best does", rival)
}

func TestMatchRefuses(t *testing.T) {
	comb := make([]LampLine, 14)
	for i := range comb {
		comb[i] = LampLine{540 + 10*float64(i), 1}
	}
	few := []LampLine{{590, 1}, {604, 1}, {631, 1}}
	for _, c := range []struct {
		name  string
		lines []LampLine
		x     map[int][]float64
		want  string
	}{
		// Equal distances fit again one line further, 20 px: within reach from -15 px.
		{"ambiguous", comb[3:], map[int][]float64{10: seen(comb, 10, -10, 0)}, "ambiguous"},
		{"few lines", few, map[int][]float64{0: seen(few, 0, 2, 0), 9: seen(few, 9, 2, 0)}, "5 are needed"},
		{"another lamp", neon(), map[int][]float64{0: {31, 52, 63, 78, 99, 128, 158, 186, 190, 197, 222, 240, 281, 290}}, "is this the lamp"},
		{"beyond the search", neon(), map[int][]float64{10: seen(neon(), 10, 18.2, 0)}, "end of the search"},
	} {
		t.Run(c.name, func(t *testing.T) {
			m, err := matchOf(c.lines, c.x, matchNominal)
			var arc *ArcError
			require.ErrorAs(t, err, &arc)
			require.ErrorContains(t, err, c.want)
			require.Equal(t, m, arc.Match)
		})
	}
}
