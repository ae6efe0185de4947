package reduce

import (
	"fmt"
	"math"
)

// What is measured is remarked on where it differs from the profile's word by so many errors
// and by so much: a contrast by this factor, a neighbour term by this part of the light.
const (
	remarkSigmas   = 5
	remarkContrast = 1.5
	remarkLent     = 0.005
)

// remarks say where the lamps show the device other than the profile makes it, by which plan
// reckons; empty where they agree.
func (r *reduction) remarks() []string {
	all := []string{}
	p, nm := r.seq.Profile, r.optics.geometry.L_c
	if e := r.optics.leak; e != nil {
		leak, err := e.At(nm)
		nominal := p.DMD.Contrast.At(nm)
		if farLeak(leak, err, 1/nominal) {
			least := 1 / (max(leak, 0) + remarkSigmas*err)
			unit := math.Pow(10, math.Floor(math.Log10(least))-1) // of two figures
			found := fmt.Sprintf("more than %.0f", math.Floor(least/unit)*unit)
			if e.Significance(nm) > neighbourSigmas {
				c, cErr := e.Contrast(nm)
				found = fmt.Sprintf("%.0f ± %.0f", c, cErr)
			}
			all = append(all, fmt.Sprintf("the lamp shows a contrast of open over closed mirrors of %s at %.0f nm, where the profile says %.0f; plan reckons by the profile's dmd.contrast (a rehearsal lets closed mirrors leak with --fault leak only)", found, nm, nominal))
		}
	}
	if d := r.optics.neighbour; d != nil {
		lent, err := d.At(nm)
		expected := p.StripArray(r.seq.ElementMirrors()).Neighbour(nm, p.Beam())
		if diff := math.Abs(lent - expected); diff > remarkLent && diff > remarkSigmas*err {
			all = append(all, fmt.Sprintf("the lamp shows that open neighbours lend each other %.2f ± %.2f %% of their light at %.0f nm, where the profile's optics make it %.2f %%; what the lamp shows is taken out (a rehearsal draws it with --fault neighbour only)", 100*lent, 100*err, nm, 100*expected))
		}
	}
	return all
}

// farLeak tells whether a part of the light that closed mirrors leak is far from the nominal one.
func farLeak(leak, err, nominal float64) bool {
	if !(nominal > 0) || math.Abs(leak-nominal) <= remarkSigmas*err {
		return false
	}
	return leak > nominal*remarkContrast || leak < nominal/remarkContrast
}
