package reduce

import (
	"context"
	"fmt"
	"path/filepath"
	"strings"

	"mirrorloom/fitsutil"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/report"
	"mirrorloom/pipeline/version"
)

// Result says what was written.
type Result struct {
	Run    *product.Run
	Ledger product.Ledger
	Schema product.Schema
	// Degraded says in plain sentences why the product is not whole; empty if
	// it is (exit code 3 or 0).
	Degraded []string
}

// ExitDegraded is run.json's exit for a product that is not whole.
const ExitDegraded = product.ExitDegraded

// result writes run.json and the report, and sums up.
func (r *reduction) result(ctx context.Context) (*Result, error) {
	r.quality.BadPixels = r.badPixels
	if a := r.optics.arcs; a != nil {
		r.quality.WavelengthRMSPx = &a.RMSPx
	}
	r.quality.Lost = len(r.roles.missing)
	r.through.quality(&r.quality)
	run := &product.Run{
		Schema: product.RunSchema, Version: version.Version, CPULevel: hadamard.CPULevel(),
		Inputs: r.inputs(), Settings: r.settings(), Quality: r.quality, Calibration: r.calibration(), Throughput: r.through.section(), Sky: r.skySection(), Flux: r.fluxSection(),
		FieldShift: r.shift.Section(), Forecast: r.reached,
		Warnings: append(append([]string{}, r.roles.degraded...), r.warnings()...),
	}
	run.Stars = r.stars.report
	if r.night.Audit != nil {
		run.Audit = r.night.Audit
	}
	if len(r.roles.degraded) > 0 {
		run.Exit = ExitDegraded
	}
	var page *report.Page
	err := r.timed("report", func() (_ int64, err error) {
		page, err = report.Draw(ctx, r.opts.Out, report.Input{
			Run: run, Ledger: r.night.Ledger, Schema: r.schema, Profile: r.seq.ProfileName, Degraded: r.roles.degraded,
			Throughput: r.through.reportCurves(), Light: r.light,
		})
		return 0, err
	})
	if err != nil {
		return nil, err
	}
	run.Stages = r.stages
	if err := fitsutil.WriteAtomic(filepath.Join(r.opts.Out, product.RunFile), run.Write); err != nil {
		return nil, err
	}
	if err := page.Write(run.Stages); err != nil {
		return nil, err
	}
	return &Result{Run: run, Ledger: r.night.Ledger, Schema: r.schema, Degraded: r.roles.degraded}, nil
}

// warnings are the frames that could not be used, and what roles noticed.
func (r *reduction) warnings() []string {
	all := r.roles.warnings
	for _, v := range []product.Verdict{product.Unreadable, product.WrongMask, product.WrongExposure, product.WrongSize, product.Duplicate, product.Extra} {
		if n := r.night.Ledger.Count(v); n > 0 {
			frames, was := "frames are", "were"
			if n == 1 {
				frames, was = "frame is", "was"
			}
			all = append(all, fmt.Sprintf("%d %s %s and %s not used: see the ledger", n, frames, strings.ReplaceAll(string(v), "-", " "), was))
		}
	}
	return all
}
