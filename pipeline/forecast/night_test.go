package forecast_test

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

func candidate(seq *sequence.Sequence) forecast.Candidate {
	return forecast.Candidate{
		Family: seq.Family, V: seq.V, K: seq.K, L: seq.L, N: seq.N(), ElementMirrors: seq.ElementMirrors(),
		Dark: seq.V - seq.N(), DwellSeconds: seq.Target.DwellSeconds, Cycles: seq.Target.Code.Cycles,
	}
}

func TestScratch(t *testing.T) {
	for name, make := range map[string]func() (*trial.Field, error){"square": trial.Square, "diagonal": trial.Diagonal} {
		field, err := make()
		require.NoError(t, err)
		zero := 0
		five, six := 5, 6
		_ = five
		a, b := field.Profile.Grid.WavelengthNM(20), field.Profile.Grid.WavelengthNM(80)
		line := field.Scene.Sources[6].Lines[0].WavelengthNM * (1 + 90/299792.)
		field.Target.Forecast = &sequence.Forecast{
			SeeingFWHMArcsec: field.Scene.SeeingFWHMArcsec, Sources: field.Scene.Sources, Sky: field.Scene.Sky, Aim: "faintest",
			Wanted: []sequence.Wanted{
				{Name: "star", Source: &zero, BandNM: []float64{a, b}},
				{Name: "ring", Source: &six, LineNM: &line},
			},
		}
		light, err := forecast.New(field.Target, field.Profile)
		require.NoError(t, err)
		n, err := field.Plan(context.Background(), t.TempDir())
		require.NoError(t, err)
		c := candidate(n.Seq)
		r, err := light.Of(context.Background(), c)
		require.NoError(t, err)
		fmt.Printf("%s %+v\n", name, *r)
		fmt.Printf("slit %+v\n", *r.Slit)
		_, err = n.Make(context.Background(), "twin", rehearse.Options{Seed: 1, Noiseless: true})
		require.NoError(t, err)
		_, err = n.Make(context.Background(), "noisy", rehearse.Options{Seed: 1})
		require.NoError(t, err)
		cube, err := trial.ReadCube(n.CubePath("twin"))
		noisy, err := trial.ReadCube(n.CubePath("noisy"))
		require.NoError(t, err)
		truth, err := cube.ReadTruth(n.TruthPath("twin"))
		require.NoError(t, err)
		for w := range 2 {
			voxels, err := light.Voxels(c, w)
			require.NoError(t, err)
			for i, v := range voxels {
				if i%(len(voxels)/12) != 0 { continue }
				at := (v.Channel*cube.Rows+v.Row)*cube.N + v.Element
				fmt.Printf("%d %d %d  light %.3f truth %.3f cube %.3f  wanted %.3f  sigma %.3f var-noisy %.3f\n", v.Element, v.Row, v.Channel, v.Light, truth[at], cube.Signal[at], v.Wanted, v.Sigma*v.Sigma, noisy.Variance[at])
			}
		}
	}
}
