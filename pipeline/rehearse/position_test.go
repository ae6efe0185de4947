package rehearse

import (
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/sequence"
)

// centroid is the first moment of a line of values about position `near`, over
// +-reach.
func centroid(values []float64, near, reach float64) float64 {
	sum, moment := 0.0, 0.0
	for i := max(int(near-reach), 0); i <= min(int(near+reach)+1, len(values)-1); i++ {
		sum += values[i]
		moment += values[i] * float64(i)
	}
	return moment / sum
}

// In single-element frames an arc line falls where section 3 of the design says,
// written out here:
//
//	x = x_c + x_e (j - j_c) + d1 l + d2 l^2 + d3 l^3 + slit_tilt q + smile q^2, q = y - y_c
//
// with x_e = u_step_px element_mirrors and j_c = (n-1)/2. Required: 0.02 px, in
// both profiles and mountings, for the profile's geometry and a true one.
func TestArcLinesFallWhereTheyShould(t *testing.T) {
	// Vacuum wavelengths of lines far from others: Kr I 587.09160 nm in air, for
	// the visible lamp (NIST Handbook of Basic Atomic Spectroscopic Data; vacuum
	// by Ciddor 1996 with specutils 1.9.1); the infrared ones from memory (see
	// configs/lamps/lamp_lines_infrared.csv).
	lines := map[string][]float64{"optical": {587.25433}, "infrared": {1582.44123, 1598.39045}}
	lamps := map[string]string{"optical": "Kr", "infrared": "KrXe"}
	for _, name := range testProfiles() {
		p := smallProfile(t, name)
		p.Detector.DarkEPerS = 0
		target := smallTarget(p)
		target.Calibration.Arc.Lamp, target.Calibration.Arc.Every = lamps[name], 4
		seq := planned(t, p, target)
		for _, perfect := range []bool{true, false} {
			// Seed 1: its lamp has both lines; not perfect, the pixels' response
			// of 1 % moves a centroid by less than 0.01 px.
			dir, _ := rehearsed(t, seq, smallScene(580), Options{Seed: 1, Perfect: perfect, Noiseless: true})
			text, err := os.ReadFile(filepath.Join(dir, TruthFolder, GeometryFile))
			require.NoError(t, err)
			g, err := ReadGeometry(GeometryFile, text)
			require.NoError(t, err)
			worst, count := 0.0, 0
			for _, step := range seq.StepsOf(sequence.Arc) {
				j := float64(openElement(seq, step))
				image := electrons(t, dir, seq, step, 0)
				for _, nm := range lines[name] {
					for y := 16; y < 40; y += 4 {
						l, q := nm-g.CenterNM, float64(y)-g.YCenterPx
						x := g.XCenterPx + g.UStepPx*2*(j-float64(seq.N()-1)/2) + g.DispersionPxPerNM[0]*l + g.DispersionPxPerNM[1]*l*l +
							g.DispersionPxPerNM[2]*l*l*l + g.SlitTilt*q + g.SmilePerPx*q*q
						worst = math.Max(worst, math.Abs(centroid(image[y], x, 5)-x))
						count++
					}
				}
			}
			t.Logf("%s, perfect %v: %d centroids, worst %.4f px", name, perfect, count, worst)
			require.Less(t, worst, 0.02, "%s, perfect %v", name, perfect)
		}
	}
}

// openElement is the element that a single-element step opens.
func openElement(seq *sequence.Sequence, step int) int {
	for j, column := range seq.ElementColumns() {
		if seq.Code[step][column] == 1 {
			return j
		}
	}
	return -1
}

// The light of one mirror row follows
//
//	y = y_c + w_step (w - r_c) + trace_tilt (x - x_c) + trace_curve (x - x_c)^2.
//
// Required: 0.02 px.
func TestTraceFallsWhereItShould(t *testing.T) {
	for _, name := range testProfiles() {
		p := smallProfile(t, name)
		p.Detector.DarkEPerS = 0
		target := smallTarget(p)
		w := map[string]int{"optical": 22, "infrared": 4}[name]
		first, last := p.WRange()
		target.Closed = []sequence.ClosedRow{{First: first, Last: w - 1}, {First: w + 1, Last: last}}
		seq := planned(t, p, target)
		for _, perfect := range []bool{true, false} {
			dir, _ := rehearsed(t, seq, smallScene(580), Options{Seed: 7, Perfect: perfect, Noiseless: true})
			text, err := os.ReadFile(filepath.Join(dir, TruthFolder, GeometryFile))
			require.NoError(t, err)
			g, err := ReadGeometry(GeometryFile, text)
			require.NoError(t, err)
			flat := electrons(t, dir, seq, seq.StepsOf(sequence.Flat)[0], 0)
			worst, count := 0.0, 0
			for x := 40; x < 120; x += 4 {
				if !litColumn(flat, x) {
					continue
				}
				column := make([]float64, len(flat))
				for y := range flat {
					column[y] = flat[y][x]
				}
				d := float64(x) - g.XCenterPx
				y := g.YCenterPx + g.WStepPx*(float64(w)-g.WMiddle) + g.TraceTilt*d + g.TraceCurvePerPx*d*d
				worst = math.Max(worst, math.Abs(centroid(column, y, 6)-y))
				count++
			}
			t.Logf("%s, perfect %v: %d centroids, worst %.4f px", name, perfect, count, worst)
			require.Greater(t, count, 10)
			require.Less(t, worst, 0.02, "%s, perfect %v", name, perfect)
		}
	}
}

// litColumn reports whether a column sees light.
func litColumn(image [][]float64, x int) bool {
	sum := 0.0
	for y := range image {
		sum += image[y][x]
	}
	return sum > 1000
}

// A true geometry stays within the bounds that the calibration is built for, and
// 200 of them reach 90 % of each.
func TestOffsetsStayWithinTheirBounds(t *testing.T) {
	p := smallProfile(t, "optical")
	seq := planned(t, p, smallTarget(p))
	nominal := nominalGeometry(seq)
	var far [5]float64
	for seed := range uint64(200) {
		g := offsetGeometry(nominal, p.Detector, seed)
		half := float64(p.Detector.Rows) / 2
		for i, ratio := range []float64{
			(g.XCenterPx - nominal.XCenterPx) / 15,
			(g.DispersionPxPerNM[0]/nominal.DispersionPxPerNM[0] - 1) / 0.02,
			(g.SmilePerPx - nominal.SmilePerPx) * half * half / 3,
			(g.SlitTilt - nominal.SlitTilt) / math.Tan(math.Pi/180),
			(g.TraceTilt - nominal.TraceTilt) * float64(p.Detector.Columns-1) / 5,
		} {
			require.LessOrEqual(t, math.Abs(ratio), 1.0001)
			far[i] = math.Max(far[i], math.Abs(ratio))
		}
		require.LessOrEqual(t, g.traceRange(p.Detector.Columns), 8.0001)
		// Mirror row r_c crosses the profile's x_c at the profile's y_c.
		require.InDelta(t, nominal.YCenterPx, g.YCenterPx+g.trace(nominal.XCenterPx), 1e-9)
	}
	for i := range far {
		require.Greater(t, far[i], 0.9, i)
	}
}
