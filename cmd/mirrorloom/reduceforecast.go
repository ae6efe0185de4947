package main

import (
	"fmt"
	"io"

	"mirrorloom/pipeline/product"
)

// mostPrinted measurements are printed; the report has them all.
const mostPrinted = 8

// printForecast prints a line a measurement: what was reached and what was forecast.
func printForecast(w io.Writer, f *product.Forecast) {
	if f == nil {
		return
	}
	for i, m := range f.Wanted {
		if i == mostPrinted {
			fmt.Fprintf(w, "%d more measurements beside their forecasts: see the report\n", len(f.Wanted)-i)
			return
		}
		if m.Ratio == nil {
			fmt.Fprintf(w, "%s: forecast S/N %.1f, not reached: %s\n", m.Name, m.Plan.SNR, m.Why)
			continue
		}
		fmt.Fprintf(w, "%s: reached S/N %.1f, forecast %.1f (%.2f): %s\n", m.Name, *m.SNR, m.Plan.SNR, *m.Ratio, m.Why)
	}
}
