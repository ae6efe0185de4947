package report

import (
	"cmp"
	"fmt"
	"slices"
	"strings"

	"mirrorloom/pipeline/product"
)

// darkFacts is what the dark columns told, beyond the figures that are always there.
func darkFacts(q product.Quality) []fact {
	var all []fact
	if q.RestoredGrowth != nil {
		all = append(all, fact{"Growth of the noise by restored frames", fmt.Sprintf("%.3g times", *q.RestoredGrowth)})
	}
	if q.ResidualLight != "" {
		all = append(all, fact{"Light without open mirrors, taken off by", string(q.ResidualLight)})
	}
	if e := q.ErrorScale; e != nil {
		all = append(all, fact{"Error scale (scatter of dark columns over their variance; 1 is due)",
			fmt.Sprintf("mean %.3f, most %.3g; VARIANCE is multiplied by it in %s of the pixels", e.Mean, e.Max, percent(e.Applied))})
	}
	if worst := worstSteps(q.DarkChi2Steps); len(worst) > 0 {
		all = append(all, fact{"Frames that fit the others worst (chi-square of dark columns; 1 is due)", strings.Join(worst, ", ")})
	}
	return all
}

// worstSteps names the steps of the largest chi-square.
func worstSteps(steps []product.StepChi2) []string {
	const named = 5
	var sorted []product.StepChi2
	for _, s := range steps {
		if s.Chi2 != nil {
			sorted = append(sorted, s)
		}
	}
	slices.SortStableFunc(sorted, func(a, b product.StepChi2) int { return cmp.Compare(*b.Chi2, *a.Chi2) })
	var names []string
	for _, s := range sorted[:min(named, len(sorted))] {
		names = append(names, fmt.Sprintf("step %d: %.2f", s.Step, *s.Chi2))
	}
	return names
}

// throughputFacts tells what each method and step gained.
func throughputFacts(t *product.Throughput) []fact {
	var all []fact
	add := func(name, format string, args ...any) { all = append(all, fact{name, fmt.Sprintf(format, args...)}) }
	for _, m := range t.Methods {
		use := fmt.Sprintf("%.0f %% of the information", 100*m.Share)
		if !m.Used {
			use = "not used"
		}
		add("By "+m.Name, "%s rms, error of a frame %s; %s", percent(m.RMS), percent(m.Error), use)
	}
	for _, m := range t.Terms {
		add("Corrected apart: "+m.Name, "%s rms, error of a frame %s", percent(m.RMS), percent(m.Error))
	}
	for _, h := range t.HeldOut {
		kept := "kept"
		if !h.Kept {
			kept = "not kept"
		}
		add("Held-out chi-square of dark columns, "+h.Step, "from %.3f to %.3f; %s", h.Before, h.After, kept)
	}
	if o := t.Offset; o != nil {
		add("Levels taken off the frames, rms", "%.3f e, error of one %.3f e", o.Value, o.Error)
	}
	if l := t.Leak; l != nil {
		add("Light of closed mirrors, against the all-off frames", "%.4f ± %.4f", l.Value, l.Error)
	}
	if i := t.Image; i != nil {
		add("Motion of the sentinel's image, rms", "%.4f px along the dispersion (error %.4f), %.4f px along the slit (%.4f); width %.2f %% (%.2f %%)",
			i.XPx.Value, i.XPx.Error, i.YPx.Value, i.YPx.Error, 100*i.FWHMPart.Value, 100*i.FWHMPart.Error)
		add("Slope of the sentinel's flux over the band, rms", "%.2f %% (error of a frame %.2f %%)", 100*i.Slope.Value, 100*i.Slope.Error)
	}
	return all
}
