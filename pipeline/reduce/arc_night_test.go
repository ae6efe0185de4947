package reduce

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// arcNight is a rehearsed night with its arcs.
type arcNight struct {
	seq     *sequence.Sequence
	dir     string
	camera  *exposure.Camera
	nominal calib.Geometry
	truth   *rehearse.Geometry
	// first and last detector rows that every element lights, nominally, and ends of
	// the lit rows.
	first, last int
	ends        []calib.RowEnd
}

// Wavelengths and traces of nights whose geometry is off by up to 15 px, 2 % of the
// dispersion, 3 px of smile, a degree of slit tilt and 5 px of trace tilt, under lamps
// that lack a tenth of their lines, have a twentieth of unknown ones and intensities
// off by up to three: below 0.05 px rms at every element and row. With
// MIRRORLOOM_VALIDATE=1 20 seeds of both profiles, else 2.
func TestArcNights(t *testing.T) {
	seeds := uint64(2)
	if os.Getenv("MIRRORLOOM_VALIDATE") != "" {
		seeds = 20
	}
	for _, c := range []struct{ profile, target, lamp string }{{"optical", "demo", "HgHeNe"}, {"infrared", "demo-infrared", "KrXe"}} {
		seq := arcSequence(t, c.profile, c.target, c.lamp)
		for seed := range seeds {
			t.Run(fmt.Sprintf("%s %d", c.profile, seed), func(t *testing.T) {
				n := rehearseArcs(t, seq, seed)
				s := n.solveArcs(t)
				n.requireWavelengths(t, s)
				n.requireTrace(t)
			})
		}
	}
}

// arcSequence plans a target with its arcs and lamp flats, and as little else as the
// code allows.
func arcSequence(t *testing.T, profile, target, lamp string) *sequence.Sequence {
	p, err := instrument.Load(profile)
	require.NoError(t, err)
	g, err := sequence.LoadTarget(target)
	require.NoError(t, err)
	g.Calibration.Bias.Count, g.Calibration.Dark.Count = 1, 0
	g.Calibration.Flat.Count, g.Calibration.Flat.CodedCycles = 1, 0
	g.Calibration.Arc.Lamp = lamp
	g.AllOffEvery, g.Code.Cycles = 0, 1
	seq, _, err := plan.Build(context.Background(), g, p)
	require.NoError(t, err)
	require.NoError(t, seq.Write(context.Background(), filepath.Join(t.TempDir(), "seq")))
	return seq
}

func rehearseArcs(t *testing.T, seq *sequence.Sequence, seed uint64) *arcNight {
	n := &arcNight{seq: seq, dir: t.TempDir(), nominal: nominalGeometry(seq)}
	_, err := rehearse.Run(context.Background(), seq, &rehearse.Scene{SeeingFWHMArcsec: 1}, rehearse.Options{Seed: seed, NoTruth: true}, n.dir, nil)
	require.NoError(t, err)
	text, err := os.ReadFile(filepath.Join(n.dir, "truth", "geometry.yaml"))
	require.NoError(t, err)
	n.truth, err = rehearse.ReadGeometry("geometry.yaml", text)
	require.NoError(t, err)
	n.camera, err = exposure.NewCamera(&seq.Profile.Detector)
	require.NoError(t, err)
	low, high := math.Inf(1), math.Inf(-1)
	for _, r := range seq.Rows {
		if r.Use != sequence.UseCoded {
			continue
		}
		s := seq.Profile.Spectrograph
		a := s.YCenterPx + s.WStepPx*(float64(r.First)-0.5-seq.Profile.WCenter())
		b := s.YCenterPx + s.WStepPx*(float64(r.Last)+0.5-seq.Profile.WCenter())
		n.ends = append(n.ends, calib.RowEnd{Row: a, Above: true}, calib.RowEnd{Row: b})
		low, high = min(low, a), max(high, b)
	}
	n.first, n.last = max(0, int(math.Ceil(low))), min(seq.Profile.Detector.Rows-1, int(high))
	return n
}

// exposure reads a frame in electrons.
func (n *arcNight) exposure(t *testing.T, step int) calib.Exposure {
	f, err := fitsutil.Open(filepath.Join(n.dir, rehearse.FrameFile(step+1)))
	require.NoError(t, err)
	defer f.Close()
	im, err := f.FirstImage()
	require.NoError(t, err)
	c := n.camera
	size := c.Columns * c.Rows
	e := calib.Exposure{Columns: c.Columns, Signal: make([]float32, size), Variance: make([]float32, size), Flags: make([]calib.Flag, size)}
	_, err = c.Read(e.Signal, im, 0, c.Rows, &exposure.Scratch{}, func(flags []calib.Flag, x, y, w int) { c.Merge(e.Flags, 0, flags, x, y, w) })
	require.NoError(t, err)
	for i, v := range e.Signal {
		e.Variance[i] = max(v, 0) + float32(c.Variance[i/c.Columns][i%c.Columns])
	}
	return e
}

func (n *arcNight) solveArcs(t *testing.T) *calib.ArcSolution {
	grid := n.seq.Profile.Grid
	fwhm := calib.LineFWHM(n.seq.Profile.Spectrograph.LSFFWHMPx, n.nominal.X_e)
	var frames []calib.ArcFrame
	for _, i := range n.seq.StepsOf(sequence.Arc) {
		pattern, j := n.seq.Pattern(i)
		require.Equal(t, sequence.PatternSingle, pattern)
		lines, err := lampLines(n.seq.Steps[i].Lamp, grid.FirstNM-20, grid.LastNM()+20)
		require.NoError(t, err)
		peaks, err := calib.DefaultPeakRule(fwhm).Find(n.exposure(t, i), n.first, n.last)
		require.NoError(t, err)
		frames = append(frames, calib.ArcFrame{Element: j, Lines: lines, Peaks: peaks})
	}
	s, err := calib.SolveArcs(n.nominal, frames, calib.DefaultArcRule(grid.FirstNM, grid.LastNM(), fwhm))
	require.NoError(t, err)
	return s
}

// trueX is where the truth puts a wavelength of element j on detector row y.
func (n *arcNight) trueX(j, y, nm float64) float64 {
	g := n.truth
	l, q, d := nm-g.CenterNM, y-g.YCenterPx, g.DispersionPxPerNM
	return g.XCenterPx + g.UStepPx*float64(n.seq.ElementMirrors())*(j-float64(n.seq.N()-1)/2) +
		d[0]*l + d[1]*l*l + d[2]*l*l*l + g.SlitTilt*q + g.SmilePerPx*q*q
}

// requireWavelengths holds the solution against the truth over the grid, at every
// element and detector row, and every line used against its own true place.
func (n *arcNight) requireWavelengths(t *testing.T, s *calib.ArcSolution) {
	p, g := n.seq.Profile, s.Geometry
	var worst, worstRMS, pull float64
	for j := range n.seq.N() {
		for y := n.first; y <= n.last; y++ {
			sum, count := 0.0, 0.0
			for i := range p.Grid.Count {
				nm := p.Grid.WavelengthNM(float64(i))
				want := n.trueX(float64(j), float64(y), nm)
				if want < 0 || want > float64(p.Detector.Columns-1) {
					continue
				}
				l, q := nm-g.L_c, float64(y)-g.Y_c
				miss := g.X_c + g.X_e*(float64(j)-g.J_c) + l*(g.D[0]+l*(g.D[1]+l*g.D[2])) + q*(g.SlitTilt+q*g.Smile) - want
				sum, count, worst = sum+miss*miss, count+1, max(worst, math.Abs(miss))
				if i%40 == 0 && y%16 == 0 {
					pull = max(pull, math.Abs(miss)/s.ErrorPx(float64(j), float64(y), nm))
				}
			}
			worstRMS = max(worstRMS, math.Sqrt(sum/count))
		}
	}
	t.Logf("%v; match of %.1f lines a frame, second %.1f; worst rms of an element and row %.4f px, worst of all %.4f px, largest pull %.1f; width %.3f px",
		s, s.Match.Score, s.Match.Second, worstRMS, worst, pull, s.Width.FWHMPx(p.Spectrograph.CenterNM))
	require.Less(t, worstRMS, 0.05)
	require.Less(t, pull, 6.0)
	for _, r := range s.Residuals {
		if r.Kept {
			require.InDelta(t, n.trueX(float64(r.Element), float64(r.FirstRow+r.LastRow)/2, r.VacuumNM), r.X, 0.3+6*r.XErr, "%+v", r)
		}
	}
}

// requireTrace measures the trace in the all-on lamp frame, and in the arcs.
func (n *arcNight) requireTrace(t *testing.T) {
	rule := calib.DefaultTraceRule(n.seq.Profile.Spectrograph.LSFFWHMPx)
	var on, arcs []calib.EdgePoint
	for i := range n.seq.Steps {
		pattern, j := n.seq.Pattern(i)
		switch kind := n.seq.Steps[i].Kind; {
		case kind == sequence.Flat && pattern == sequence.PatternOn:
			points, err := rule.Find(n.exposure(t, i), n.ends, 0)
			require.NoError(t, err)
			on = append(on, points...)
		case kind == sequence.Arc:
			points, err := rule.Find(n.exposure(t, i), n.ends, len(n.ends)*j)
			require.NoError(t, err)
			arcs = append(arcs, points...)
		}
	}
	for _, c := range []struct {
		name   string
		points []calib.EdgePoint
	}{{"all-on", on}, {"arcs", arcs}} {
		s, err := calib.FitTrace(n.nominal, c.points, n.camera.Columns)
		require.NoError(t, err)
		worst := 0.0
		for x := range n.camera.Columns {
			worst = max(worst, math.Abs(n.traceMiss(s, float64(x))))
		}
		t.Logf("trace by %s: %d points, rms %.3f px, worst %.4f px; offset %.4f px, plate scale %.5f", c.name, s.Used, s.RMSPx, worst, s.OffsetPx, s.PlateScale)
		require.Less(t, worst, 0.03)
		require.InDelta(t, 0, s.OffsetPx, 0.02)
		require.InDelta(t, 1, s.PlateScale, 2e-3)
	}
}

// traceMiss is how far a trace is off at x, both zero at the nominal x_c.
func (n *arcNight) traceMiss(s *calib.TraceSolution, x float64) float64 {
	truth := func(x float64) float64 {
		d := x - n.truth.XCenterPx
		return d * (n.truth.TraceTilt + d*n.truth.TraceCurvePerPx)
	}
	d := x - n.nominal.X_c
	return d*(s.TraceTilt+d*s.TraceCurve) - truth(x) + truth(n.nominal.X_c)
}
