package report

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

// The forecast stands beside what was reached, what was not reached is told, and names are no
// HTML; without a forecast there is no section.
func TestForecastSection(t *testing.T) {
	at := func(x float64) *float64 { return &x }
	run := &product.Run{Forecast: &product.Forecast{
		Wanted: []product.Reached{
			{Name: "rim <b>", FromNM: 500, ToNM: 502, Plan: product.Expected{SNR: 45}, Taken: product.Expected{SNR: 44.4}, SNR: at(41.9), Ratio: at(0.931),
				TimeRatio: at(0.987), LightRatio: at(0.95), LightRatioError: at(0.031), NoiseRatio: at(1.007), Why: "3 of 127 frames were lost"},
			{Name: "beyond", Plan: product.Expected{SNR: 12}, Why: "no voxel of it is good in this cube"},
		},
		Notes: []string{"The sky is 1.31 times as bright as forecast."},
	}}
	page := renderPage(t, t.TempDir(), Input{Run: run})
	checkHTML(t, page)
	for _, part := range []string{
		"Forecast and what was reached", "rim &lt;b&gt;", `<td class="n">45.0</td>`, `<td class="n">41.9</td>`, `<td class="n">0.93</td>`, "0.95 ± 0.03",
		"3 of 127 frames were lost.", "no voxel of it is good in this cube.", "The sky is 1.31 times as bright as forecast.", `aria-label="S/N reached over that forecast"`,
	} {
		contains(t, page, part)
	}
	run.Forecast = nil
	require.NotContains(t, renderPage(t, t.TempDir(), Input{Run: run}), "what was reached")
	require.Empty(t, drawRatios([]product.Reached{{Name: "nothing"}}))
}
