package reduce

import "mirrorloom/pipeline/product"

// settings are what the run was asked for, defaults filled in, as run.json
// lists them.
func (r *reduction) settings() map[string]any {
	recipe := r.opts.Recipe
	stage := func(s StageRecipe) map[string]any { return map[string]any{"use": s.Use} }
	settings := map[string]any{
		"night":        r.opts.NightName,
		"sequence":     r.opts.SequenceName,
		"cube":         r.opts.Cube,
		"elements":     r.opts.Elements,
		"memory_bytes": r.opts.MemoryBytes,
		"workers":      r.opts.Workers,
		"as_labelled":  r.opts.AsLabelled,
		"recipe": map[string]any{
			"name": recipe.Name,
			"detector": map[string]any{
				"use": recipe.Detector.Use, "clip_sigma": recipe.Detector.ClipSigma,
				"hot_sigma": recipe.Detector.HotSigma, "dead_below": recipe.Detector.DeadBelow,
			},
			"flat": stage(recipe.Flat), "arc": stage(recipe.Arc), "sky": recipe.Sky.settings(), "flux": recipe.Flux.settings(),
			"grid": map[string]any{
				"use": recipe.Grid.Use, "first_nm": r.schema.Grid.FirstNM, "step_nm": r.schema.Grid.StepNM, "count": r.schema.Grid.Count,
				"axis": r.schema.Grid.Axis.String(), "spacing": r.schema.Grid.Spacing.String(), "frame": frameOf(r.schema.Frame),
				"refraction": recipe.Grid.Refraction, "onto": recipe.Grid.Onto,
			},
			"throughput": stage(recipe.Throughput), "repair": stage(recipe.Repair),
		},
	}
	if s := recipe.Stars; s.Use != useOff {
		settings["recipe"].(map[string]any)["stars"] = map[string]any{"use": s.Use, "fit": s.Fit, "search_arcsec": s.SearchArcsec}
	}
	if len(r.opts.Cycles) > 0 {
		settings["cycles"] = r.opts.Cycles
	}
	return settings
}

// inputs are the files that rule the reduction, with their digests; the ledger
// lists the frames.
func (r *reduction) inputs() []product.Input {
	return []product.Input{
		{File: r.opts.Recipe.Name, SHA256: r.opts.Recipe.SHA},
		{File: "sequence.fits", SHA256: r.seq.SHA},
		{File: "profile.yaml", SHA256: r.seq.ProfileSHA},
		{File: "target.yaml", SHA256: r.seq.TargetSHA},
	}
}
