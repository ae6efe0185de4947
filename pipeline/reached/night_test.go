package reached_test

import (
	"context"
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
)

func TestProbe(t *testing.T) {
	plans := trial.ForecastPlans()
	for _, i := range []int{0, 1, 2, 3, 4, 6, 9} {
		f, err := plans[i].Field()
		require.NoError(t, err)
		n, err := f.Plan(context.Background(), t.TempDir())
		require.NoError(t, err)
		r, err := n.Make(context.Background(), "a", rehearse.Options{Seed: 5, NoTruth: true})
		require.NoError(t, err)
		require.NotNil(t, r.Run.Forecast, r.Run.Warnings)
		fmt.Println(plans[i].Name, r.Run.Forecast.Sky, r.Run.Forecast.Notes, r.Run.Stages)
		show(r.Run.Forecast)
	}
}

func show(f *product.Forecast) {
	for _, w := range f.Wanted {
		if w.Ratio == nil {
			fmt.Println(w.Name, w.Why)
			continue
		}
		fmt.Printf("%-14s plan %7.1f/%5.1f snr %6.1f  reached %7.1f/%5.1f %6.1f ratio %.3f light %.3f±%.3f noise %.3f %s %v q %.2f lamps %.2f good %.2f  pull %.2f %s\n", w.Name, w.Plan.Signal, w.Plan.Sigma, w.Plan.SNR, *w.Signal, *w.Error, *w.SNR, *w.Ratio, *w.LightRatio, *w.LightRatioError, *w.NoiseRatio, w.Unwanted, w.Beside, w.ErrorScale, w.Lamps, w.Good, (*w.LightRatio-1) / *w.LightRatioError, w.Why)
	}
	_ = math.Pi
}
