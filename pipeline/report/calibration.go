package report

import (
	"fmt"
	"math"
	"strings"

	"mirrorloom/pipeline/product"
)

// calibrationFacts tells what was measured of the instrument; none if nothing was.
func calibrationFacts(c *product.Calibration) []fact {
	if c == nil {
		return nil
	}
	var all []fact
	add := func(name, format string, args ...any) { all = append(all, fact{name, fmt.Sprintf(format, args...)}) }
	for i, a := range c.Amplifiers {
		add(fmt.Sprintf("Amplifier %d, from pairs of frames", i+1), "gain %.4f ± %.4f e/ADU, read noise %.3f ± %.3f e",
			a.GainEPerADU, a.GainError, a.ReadNoiseE, a.ReadNoiseError)
	}
	if p := c.Persistence; p != nil {
		add("Charge that appears in the next frame", "%.1e ± %.1e of it", p.Value, p.Error)
	}
	if a := c.Arcs; a != nil {
		add("Arc lines", "%d centroids used, %d rejected; rms %.4f px", a.Lines, a.Rejected, a.RMSPx)
		add("Wavelengths, standard error at worst", "%.4f px", a.WorstErrorPx)
		add("Light against the profile's place", "%+.2f px, dispersion × %.5f", a.ShiftPx, a.DispersionRatio)
		add("Line width (FWHM)", "%s", list(a.WidthPx, func(w product.AtNM) string { return fmt.Sprintf("%.2f px at %.0f nm", w.Value, w.WavelengthNM) }))
	}
	if t := c.Trace; t != nil {
		add("Trace", "tilt %.3e px/px, curve %.2e px⁻¹, from %d places of the slit's ends; rms %.3f px", t.Tilt, t.Curve, t.Ends, t.RMSPx)
	}
	if f := c.Flat; f != nil {
		add("Flat field", "pixels %.2f %% rms, slit %.2f %%, efficiency %.2f %% (waves down to %.0f voxels)",
			100*f.PixelRMS, 100*f.SlitRMS, 100*f.EfficiencyRMS, f.PeriodVoxels)
		if f.AddedVariance > 0 {
			add("Variance that the flat field adds", "%.3f %% of a voxel's, in the median", 100*f.AddedVariance)
		}
	}
	if len(c.FlatDepth) > 0 {
		add("How deep the flat field goes", "%s", list(c.FlatDepth, func(d product.DepthAtSN) string {
			return fmt.Sprintf("%.3f %% where photons allow %.3f %% (%d × %d pixels), %.3f ± %.3f %% beyond", 100*d.RMS, 100/d.SN, d.Side, d.Side, 100*d.Excess, 100*d.ExcessError)
		}))
	}
	if len(c.Neighbour) > 0 {
		add("Light of open neighbours", "%s", list(c.Neighbour, func(d product.AtNM) string {
			return fmt.Sprintf("%.3f ± %.3f %% at %.0f nm", 100*d.Value, 100*d.Error, d.WavelengthNM)
		}))
	}
	if len(c.Contrast) > 0 {
		add("Contrast of the mirrors", "%s", list(c.Contrast, func(d product.AtNM) string {
			return fmt.Sprintf("%.0f ± %.0f at %.0f nm", d.Value, math.Ceil(d.Error), d.WavelengthNM)
		}))
	}
	return all
}

func list[T any](values []T, text func(T) string) string {
	var parts []string
	for _, v := range values {
		parts = append(parts, text(v))
	}
	return strings.Join(parts, "; ")
}
