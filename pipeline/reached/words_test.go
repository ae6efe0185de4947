package reached

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

// measured is a measurement with the four factors of its ratio.
func measured(time, throughput, light, lightError, noise float64) *product.Reached {
	snr, ratio := 100.0, time*light/noise
	return &product.Reached{
		Plan: product.Expected{SNR: snr / ratio}, SNR: &snr, Ratio: &ratio, TimeRatio: &time, ThroughputRatio: &throughput,
		LightRatio: &light, LightRatioError: &lightError, NoiseRatio: &noise, Good: 1,
	}
}

// Worked by hand from the rule: as forecast only where light and noise agree within their
// errors, and the S/N within 5 %; else the cause of the largest factor comes first.
func TestWhy(t *testing.T) {
	flagged := measured(0.86, 1, 1, 0.01, 1)
	flagged.Good = 0.91
	flagged.Flags = []product.FlagPart{{Name: "LOWFLAT", Part: 0.06}, {Name: "BADPIXEL", Part: 0.03}, {Name: "PARTIAL", Part: 0.001}}
	shaken := measured(0.564, 0.564, 0.998, 0.01, 0.97)
	shaken.Throughput = 0.67
	for name, c := range map[string]struct {
		w      *product.Reached
		frames string
		want   string
	}{
		"well":                   {measured(1, 1, 1.01, 0.01, 1.02), "", "as forecast, within the errors"},
		"the throughput's error": {shaken, "", "the error of the frames' throughput, 1.3 % a frame, is 67 % of the variance (S/N × 0.56); its light is as forecast (1.00 ± 0.01)"},
		"a faint one":            {measured(1, 1, 1.15, 0.08, 1), "", "its light is 1.15 ± 0.08 of the forecast's, which its own error explains (S/N × 1.15)"},
		"brighter":               {measured(1, 1, 1.15, 0.01, 1.04), "", "its light is 1.15 ± 0.01 of the forecast's: the source is brighter than forecast, or more of its light came through (S/N × 1.15)"},
		"noisier":                {measured(1, 1, 1, 0.01, 1.2), "", "the noise is 1.20 times the forecast's (S/N × 0.83); its light is as forecast (1.00 ± 0.01)"},
		"opposite factors":       {measured(1, 1, 1.1, 0.01, 1.1), "", "its light is 1.10 ± 0.01 of the forecast's: the source is brighter than forecast, or more of its light came through (S/N × 1.10); the noise is 1.10 times the forecast's (S/N × 0.91)"},
		"voxels":                 {flagged, "", "9 % of its voxels are not good (6 % LOWFLAT, 3 % BADPIXEL) (S/N × 0.86); its light is as forecast (1.00 ± 0.01)"},
		"frames first":           {measured(0.7, 1, 0.9, 0.01, 1), "60 of 118 frames were lost", "60 of 118 frames were lost (S/N × 0.70); its light is 0.90 ± 0.01 of the forecast's: the source is fainter than forecast, or less of its light came through (S/N × 0.90)"},
		"many small ones":        {measured(0.985*0.985, 0.985, 0.985, 0.01, 1.03), "", "the noise is 1.03 times the forecast's (S/N × 0.97); its light is as forecast (0.98 ± 0.01)"},
		"better than planned":    {measured(1.2, 1.2, 1, 0.01, 1), "", "the frames' throughput is known to 1.3 %, better than planned (S/N × 1.20); its light is as forecast (1.00 ± 0.01)"},
	} {
		t.Run(name, func(t *testing.T) {
			require.Equal(t, c.want, why(&product.Forecast{ThroughputErr: 0.013}, c.w, c.frames))
			all := 1.0
			for _, f := range causesOf(&product.Forecast{}, c.w, c.frames) {
				all *= f.factor
			}
			require.InEpsilon(t, *c.w.Ratio, all, 1e-12, "the factors are all there is")
		})
	}
	none := measured(1, 1, 1, 0.1, 1)
	none.SNR, none.Flags = nil, []product.FlagPart{{Name: "NODATA", Part: 1}}
	require.Equal(t, "no voxel of it is good in this cube (100 % NODATA)", why(&product.Forecast{}, none, ""))
}
