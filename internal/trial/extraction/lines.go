package extraction

import (
	"context"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/extract"
)

// LinePulls are (fit - fit of the truth)/error of a line's maps, of the spectra whose
// line stands out of its error by a factor in the truth. The truth is fitted with the
// same model, so that what a Gaussian cannot follow is in both.
type LinePulls struct {
	Line                             int
	Flux, FluxNaive, Velocity, Width trial.Moments
	Settled, Wanted                  int
	// Gradient of the velocities in km/s per arc second to the east and north.
	Gradient, GradientErr, GradientTrue [2]float64
}

// The spectra of which a line's flux, and its velocity and width, are judged have so
// many times the error of its flux in the truth.
const (
	fluxSN  = 5.0
	shapeSN = 10.0
)

// MeasureLines fits the lines in a run's cube and in its truth.
func MeasureLines(ctx context.Context, run, truth string, o extract.LineOptions) ([]LinePulls, error) {
	// Nothing may be left out because of its noise: the truth chooses.
	o.MinSN = math.Inf(-1)
	c, err := extract.Open(run)
	if err != nil {
		return nil, err
	}
	defer c.Close() // only read from
	f, err := fitsutil.Open(truth)
	if err != nil {
		return nil, err
	}
	defer f.Close() // only read from
	model, err := c.WithLight(f)
	if err != nil {
		return nil, err
	}
	quiet := func(int) {}
	found, err := c.Lines(ctx, o, quiet)
	if err != nil {
		return nil, err
	}
	wanted, err := model.Lines(ctx, o, quiet)
	if err != nil {
		return nil, err
	}
	all := make([]LinePulls, len(o.RestNM))
	for i := range all {
		all[i].Line = i
		all[i].compare(found, wanted)
		all[i].Gradient, all[i].GradientErr = gradient(c, found, wanted, i, found)
		all[i].GradientTrue, _ = gradient(c, found, wanted, i, wanted)
	}
	return all, nil
}

func (p *LinePulls) compare(found, wanted *extract.LineMap) {
	for at := range found.Lines {
		got, want := found.Lines[at][p.Line], wanted.Lines[at][p.Line]
		sn := want.Flux / want.FluxErr
		if !(sn > fluxSN) {
			continue
		}
		p.Wanted++
		if math.IsNaN(got.Flux) {
			continue
		}
		p.Settled++
		p.Flux.Add((got.Flux - want.Flux) / got.FluxErr)
		p.FluxNaive.Add((got.Flux - want.Flux) / got.FluxNaiveErr)
		if sn > shapeSN {
			p.Velocity.Add((got.Velocity - want.Velocity) / got.VelocityErr)
			p.Width.Add((got.Width - want.Width) / got.WidthErr)
		}
	}
}

// gradient fits a plane to the velocities of from by weighted least squares, weights
// and choice those of the truth's errors. Neighbouring rows share pixels: the error
// is widened as if every second row counted.
func gradient(c *extract.Cube, found, wanted *extract.LineMap, line int, from *extract.LineMap) (slope, err [2]float64) {
	normal, right := mat.NewSymDense(3, nil), mat.NewVecDense(3, nil)
	middle := c.Position(float64(wanted.Elements-1)/2, float64(wanted.Rows-1)/2)
	for at := range wanted.Lines {
		w := wanted.Lines[at][line]
		if !(w.Flux/w.FluxErr > shapeSN) || math.IsNaN(found.Lines[at][line].Velocity) || math.IsNaN(w.Velocity) {
			continue
		}
		p := c.Position(float64(at%wanted.Elements), float64(at/wanted.Elements))
		row := [3]float64{1, (p.RADeg - middle.RADeg) * math.Cos(middle.DecDeg*math.Pi/180) * 3600, (p.DecDeg - middle.DecDeg) * 3600}
		weight := 1 / (w.VelocityErr * w.VelocityErr)
		for i := range row {
			right.SetVec(i, right.AtVec(i)+weight*row[i]*from.Lines[at][line].Velocity)
			for k := range i + 1 {
				normal.SetSym(i, k, normal.At(i, k)+weight*row[i]*row[k])
			}
		}
	}
	var chol mat.Cholesky
	var x mat.VecDense
	var inverse mat.SymDense
	if !chol.Factorize(normal) || chol.SolveVecTo(&x, right) != nil || chol.InverseTo(&inverse) != nil {
		return [2]float64{math.NaN(), math.NaN()}, slope
	}
	for i := range slope {
		slope[i], err[i] = x.AtVec(i+1), math.Sqrt(2*inverse.At(i+1, i+1))
	}
	return slope, err
}

// Findings judge a line: the standard deviations of pulls within 0.1 of 1, and the
// gradient within its error of the truth's (5 times, as every figure). The means are
// stated: a fit is not linear in the data, so that velocities and above all widths
// near S/N 10 are off by a tenth of their errors.
func (p *LinePulls) Findings(name string) []trial.Finding {
	pulls := func(what string, m trial.Moments) []trial.Finding {
		n := m.N / 2
		return []trial.Finding{
			trial.Near(fmt.Sprintf("%s: pulls of the %s, standard deviation", name, what), m.Std(), 1, 0.1, 1/math.Sqrt(2*float64(n)), n),
			trial.Stated(fmt.Sprintf("%s: pulls of the %s, mean", name, what), m.Mean(), n),
		}
	}
	all := append(append(pulls("flux", p.Flux), pulls("velocity", p.Velocity)...), pulls("width", p.Width)...)
	all = append(all,
		trial.Stated(name+": pulls of the flux by naive errors, standard deviation", p.FluxNaive.Std(), p.FluxNaive.N/2),
		trial.AtLeast(name+": share of fits that settled", float64(p.Settled)/float64(max(p.Wanted, 1)), 0.97, p.Wanted))
	for i, way := range []string{"east", "north"} {
		all = append(all,
			trial.Near(fmt.Sprintf("%s: gradient to the %s less the truth's, over its error", name, way), (p.Gradient[i]-p.GradientTrue[i])/p.GradientErr[i], 0, 0, 1, p.Velocity.N/2),
			trial.Stated(fmt.Sprintf("%s: gradient to the %s, km/s per arcsec", name, way), p.Gradient[i], p.Velocity.N/2))
	}
	return all
}
