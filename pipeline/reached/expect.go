package reached

import (
	"context"
	"slices"

	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// expect makes the forecasts of all that is wanted: for the plan, and for what was taken.
func (n *Night) expect(ctx context.Context) ([]measurement, error) {
	seq := n.Sequence
	candidate := forecast.CandidateOf(seq)
	plan, err := forecast.New(seq.Target, seq.Profile)
	if err != nil {
		return nil, err
	}
	planned, err := plan.Planned(ctx, candidate)
	if err != nil {
		return nil, err
	}
	all := make([]measurement, len(planned))
	edges := n.edgesNM()
	target := n.target()
	var wanted []sequence.Wanted
	var kept []*measurement
	for i, m := range planned {
		all[i].plan = m
		if all[i].outside = m.FromNM < edges[0] || m.ToNM > edges[len(edges)-1]; !all[i].outside {
			wanted, kept = append(wanted, target.Forecast.Wanted[i]), append(kept, &all[i])
		}
	}
	light := plan
	if !n.asPlanned() {
		target.Forecast.Wanted, target.Forecast.Aim = wanted, sequence.AimFaintest
		if light, err = forecast.NewOn(target, seq.Profile, edges); err != nil {
			return nil, err
		}
	}
	measures, voxels, err := light.Taken(ctx, candidate, n.Cycles, n.ThroughputErr)
	if err != nil {
		return nil, err
	}
	expected := measures // with the plan's error of the throughput
	if n.ThroughputErr != nil {
		if expected, _, err = light.Taken(ctx, candidate, n.Cycles, nil); err != nil {
			return nil, err
		}
	}
	for i, m := range kept {
		m.taken, m.a = measures[i], voxels[i]
		if measures[i].Sigma > 0 {
			m.throughput = expected[i].Sigma / measures[i].Sigma
		}
		if m.r, err = light.Beside(ctx, candidate, i); err != nil {
			return nil, err
		}
	}
	return all, nil
}

// asPlanned tells whether the cube has the plan's wavelengths, and its sources where the plan
// has them.
func (n *Night) asPlanned() bool {
	return n.Axis == product.SpectralAxis{Grid: n.Sequence.Profile.Grid} && n.Place == nil && !n.Refracted
}

// edgesNM are those of the cube's voxels at the telescope.
func (n *Night) edgesNM() []float64 {
	if n.asPlanned() {
		return n.Sequence.Profile.Grid.EdgesNM()
	}
	edges := make([]float64, n.Axis.Grid.Count+1)
	for i := range edges {
		edges[i] = n.Axis.ObservedNM(float64(i) - 0.5)
	}
	return edges
}

// target is the sequence's, with its sources where they are in the cube. Only what the
// forecast changes is copied.
func (n *Night) target() *sequence.Target {
	t := *n.Sequence.Target
	f := *t.Forecast
	t.Forecast = &f
	f.Sources, f.Wanted = slices.Clone(f.Sources), slices.Clone(f.Wanted)
	if n.Place != nil {
		for i := range f.Sources {
			s := &f.Sources[i]
			s.EastArcsec, s.NorthArcsec = n.Place(s.EastArcsec, s.NorthArcsec)
		}
		for i := range f.Wanted {
			w := &f.Wanted[i]
			if w.EastArcsec != nil && w.NorthArcsec != nil {
				east, north := n.Place(*w.EastArcsec, *w.NorthArcsec)
				w.EastArcsec, w.NorthArcsec = &east, &north
			}
		}
	}
	if f.Atmosphere != nil && n.Refracted {
		air := *f.Atmosphere
		air.Refraction = false
		f.Atmosphere = &air
	}
	return &t
}
