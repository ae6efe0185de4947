package trial

import (
	"context"
	"fmt"

	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// Calibrated makes an imperfect night of the field with its truth and calibrates and
// reduces it.
func (f *Field) Calibrated(ctx context.Context, dir string, seed uint64) (*Night, *reduce.Result, error) {
	f.Imperfect = true
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, nil, err
	}
	result, err := n.Make(ctx, Noisy, rehearse.Options{Seed: seed})
	if err != nil {
		return nil, nil, err
	}
	if len(result.Degraded) > 0 {
		return nil, nil, fmt.Errorf("a night without a fault is not whole: %v", result.Degraded)
	}
	return n, result, nil
}

// CalibratedFindings compare such a night with its truth: pulls, flux, and place and
// flux of the lines of the scene's nebula at these vacuum wavelengths. The deciles are
// those of the cube's own VARIANCE: calibrated lamps without noise are another case,
// and on the fields of such nights no sample is faint enough for its noise to rule its
// variance.
func (n *Night) CalibratedFindings(name string, linesNM []float64) ([]Finding, error) {
	cube, err := ReadCube(n.CubePath(Noisy))
	if err != nil {
		return nil, err
	}
	truth, err := cube.ReadTruth(n.TruthPath(Noisy))
	if err != nil {
		return nil, err
	}
	pulls, err := NewPulls(cube, truth, cube.Variance, 1)
	if err != nil {
		return nil, err
	}
	small, err := NewPulls(cube, truth, cube.Variance, 0.85)
	if err != nil {
		return nil, err
	}
	list := append(pulls.CalibratedFindings(name),
		MustFail(name+": the pulls' check, VARIANCE scaled by 0.85", small.CalibratedFindings(name)),
		cube.WhiteLight(name, truth))
	for _, nm := range linesNM {
		a, err := cube.MeasureLine(truth, n.Field.Profile.Grid, nm)
		if err != nil {
			return nil, err
		}
		list = append(list, a.Findings(fmt.Sprintf("%s, line at %.1f nm", name, nm))...)
	}
	return list, nil
}
