package trial

import (
	"context"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Lightless is a field that sends nothing to a detector without dark current, so
// that its read noise is all: n elements of one mirror on a detector of two
// amplifiers. 64 bias frames keep the noise of their mean below 1 % of a slit
// scan's.
func Lightless(n int) (*Field, error) {
	f, err := load("optical", "demo")
	if err != nil {
		return nil, err
	}
	const voxels, margin = 32, 12
	// Enough rows that 5 standard errors of the gain are less than its 3 %: 30000
	// independent voxels, of which half of the cube's count.
	mirrors := max(18, 60000/(n*voxels)+1)
	rows := mirrors + 6
	p, t := f.Profile, f.Target
	p.DMD.Columns, p.DMD.Rows = n+2, mirrors
	p.Spectrograph.SlitTilt = 0
	p.Grid = instrument.Grid{FirstNM: p.Spectrograph.CenterNM - 8, StepNM: 0.5, Count: voxels}
	columns := 2 * ((n + voxels + 2*margin + 1) / 2)
	p.Spectrograph.XCenterPx, p.Spectrograph.YCenterPx = float64(columns)/2, float64(rows)/2
	TwoAmplifiers(&p.Detector, columns, rows)
	p.Detector.DarkEPerS = 0
	t.Calibration = sequence.Calibration{Bias: sequence.BiasFrames{Count: 64}, Arc: sequence.ArcFrames{Every: 1}}
	t.AllOffEvery = 0
	t.Code.Cycles, t.Code.ElementMirrors = 1, 1
	return f, nil
}

// Gain is what a code gained over a slit scan of the same elements in the same
// time, where read noise is all.
type Gain struct {
	V, Dark int
	// Measured is the ratio of the two cubes' noise, each over its own dwell.
	Measured, StandardError float64
	N                       int // independent samples in each cube
	// SlitPulls are signal over sigma in the slit scan's cube, CodePulls in the
	// code's.
	SlitPulls, CodePulls Moments
}

// Predicted is (v+1)/(2 sqrt v), times n/v for the frames that the dark columns
// cost: in the same time each of v frames is n/v as long as one of the slit scan,
// the signal with it, while the read noise stays.
func (g *Gain) Predicted() float64 {
	v := float64(g.V)
	return (v + 1) / (2 * math.Sqrt(v)) * (v - float64(g.Dark)) / v
}

// Finding demands the predicted gain within 3 %.
func (g *Gain) Finding() Finding {
	want := g.Predicted()
	f := Near(fmt.Sprintf("gain over the slit scan, v = %d, g = %d", g.V, g.Dark), g.Measured, want, 0.03*want, g.StandardError, g.N)
	return f
}

// PullFindings judge the pulls of both cubes: without light the truth is 0. Of the
// slit scan only the scatter is judged: the noise of the bias level and of the
// master bias enters every element of a pixel alike, so that the mean over the
// elements does not average it.
func (g *Gain) PullFindings() []Finding {
	name := fmt.Sprintf("lightless field, v = %d, g = %d", g.V, g.Dark)
	slit := clean.judge(name+", slit scan", &g.SlitPulls)
	return append(clean.judge(name+", code", &g.CodePulls), slit[1])
}

// MeasureGain rehearses and reduces a coded night and a slit scan of equal total
// exposure, in folders of dir.
func MeasureGain(ctx context.Context, dir string, v, dark int, seed uint64) (*Gain, error) {
	n := v - dark
	const slitDwell = 90
	slit, err := lightlessNight(ctx, filepath.Join(dir, "slit"), "slit-scan", n, 0, slitDwell, seed)
	if err != nil {
		return nil, fmt.Errorf("the slit scan: %w", err)
	}
	codeDwell := slitDwell * float64(n) / float64(v)
	code, err := lightlessNight(ctx, filepath.Join(dir, "code"), "m-sequence", v, dark, codeDwell, seed+1)
	if err != nil {
		return nil, fmt.Errorf("the coded night: %w", err)
	}
	g := &Gain{V: v, Dark: dark, SlitPulls: slit.pulls, CodePulls: code.pulls}
	g.N = min(slit.signal.N, code.signal.N) / 2
	g.Measured = (slit.signal.Std() / slitDwell) / (code.signal.Std() / codeDwell)
	// Each standard deviation is known to 1/sqrt(2N) of itself.
	g.StandardError = g.Measured / math.Sqrt(float64(g.N))
	return g, nil
}

type lightless struct{ signal, pulls Moments }

func lightlessNight(ctx context.Context, dir, family string, v, dark int, dwell float64, seed uint64) (*lightless, error) {
	f, err := Lightless(v - dark)
	if err != nil {
		return nil, err
	}
	f.SetCode(family, v, dark)
	f.Target.DwellSeconds = dwell
	night, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	if err := night.Rehearse(ctx, Noisy, rehearse.Options{Seed: seed, NoTruth: true}); err != nil {
		return nil, err
	}
	if _, err := night.Reduce(ctx, Noisy, reduce.Options{Cube: true}); err != nil {
		return nil, err
	}
	c, err := ReadCube(night.CubePath(Noisy))
	if err != nil {
		return nil, err
	}
	m := new(lightless)
	for i, v := range c.Signal {
		if c.Good(i) {
			m.signal.Add(float64(v))
			m.pulls.Add(float64(v) / math.Sqrt(float64(c.Variance[i])))
		}
	}
	return m, nil
}
