package main

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/internal/trial"
)

func forecasts() check {
	return check{
		name: "Forecast S/N against rehearsed nights",
		about: `Twelve plans of the small fields of both profiles: four families and the slit scan, faint
to bright, two with extinction, two with leaking mirrors. Twenty nights of each, rehearsed
and reduced; every voxel less the truth is divided by the standard deviation that the
forecast gave it beforehand, and so are sums: lines of the nebula at places of its rim, and
bands of four stars. The ratio is that of S/N: rms of what is so divided, and the forecast's
light over the truth's.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			const nights = 20
			var all []trial.Finding
			var lines, bands trial.Forecasted
			for i, p := range trial.ForecastPlans() {
				l, b, err := p.MeasureForecast(ctx, filepath.Join(dir, fmt.Sprint(i)), nights, uint64(9000+100*i))
				if err != nil {
					return all, err
				}
				all = append(append(all, l.Findings(p.Name+", line")...), b.Findings(p.Name+", band")...)
				lines.Merge(l)
				bands.Merge(b)
			}
			short := lines.Scaled(0.94)
			return append(all, lines.SumFindings("all plans, line"), bands.SumFindings("all plans, band"),
				trial.MustFail("the same, the forecast's sigma scaled by 0.94", append(short.Findings("line")[:1], short.SumFindings("line")))), nil
		},
	}
}
