package demo

import (
	"fmt"
	"path/filepath"
	"strings"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
)

// Words tells a user where things are in dir and how well the cube agrees with
// the truth.
func (r *Result) Words(dir string) string {
	var b strings.Builder
	line := func(name, path string) { fmt.Fprintf(&b, "  %-10s %s\n", name, path) }
	fmt.Fprintf(&b, "%d frames rehearsed and reduced; look at\n", r.Rehearsal.Frames)
	line("report", filepath.Join(dir, RunFolder, product.ReportFile))
	line("cube", filepath.Join(dir, RunFolder, product.CubeFile))
	line("truth", filepath.Join(dir, NightFolder, rehearse.TruthFolder, rehearse.TruthFile))
	line("frames", filepath.Join(dir, NightFolder))
	line("sequence", filepath.Join(dir, SequenceFolder))
	for _, why := range r.Degraded {
		fmt.Fprintf(&b, "not whole: %s\n", why)
	}
	a := r.Agreement
	fmt.Fprintf(&b, "\ncube against truth, %d good voxels (%.1f %% of all)\n", a.Good, 100*float64(a.Good)/float64(a.Voxels))
	fmt.Fprintf(&b, "  flux       %.6f of the truth's\n", a.Flux)
	fmt.Fprintf(&b, "  pulls      mean %+.4f, standard deviation %.4f (0 and 1 if every error is believed)\n", a.Pulls.Mean, a.Pulls.Std)
	fmt.Fprintf(&b, "  by decile of the counts:    %s\n", deciles(a.ByCounts))
	fmt.Fprintf(&b, "  by decile of the signal:    %s\n", deciles(a.BySignal))
	b.WriteString("\n")
	for _, s := range r.Stages {
		fmt.Fprintf(&b, "  %-10s %6.1f s\n", s.Name, s.Seconds)
	}
	return b.String()
}

// deciles prints the standard deviations in tenths and the farthest mean.
func deciles(d [10]Pulls) string {
	var parts []string
	worst := 0.0
	for _, p := range d {
		parts = append(parts, fmt.Sprintf("%.3f", p.Std))
		if abs(p.Mean) > abs(worst) {
			worst = p.Mean
		}
	}
	return strings.Join(parts, " ") + fmt.Sprintf("  farthest mean %+.3f", worst)
}

func abs(x float64) float64 { return max(x, -x) }
