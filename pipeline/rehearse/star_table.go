package rehearse

import (
	"bytes"
	"fmt"
	"math"

	"mirrorloom/calib/physics"
)

// starTable is truth/refstar_flux.csv: the reference star's flux above the atmosphere, every
// nm from 10 nm before the grid to 10 nm behind it, as a catalogue of such stars would
// have it: vacuum nm and aW m-2 nm-1. Wavelengths without light are left out.
func (r *rehearsal) starTable() []byte {
	const beyondNM = 10
	star, grid := r.scene.RefStar.Source(), r.optics.profile.Grid
	perNM := photons(r.scene, &star)
	var text bytes.Buffer
	fmt.Fprintln(&text, "wavelength_nm,flux_aw_m2_nm")
	last := math.Ceil(grid.WavelengthNM(float64(grid.Count)-0.5)) + beyondNM
	for nm := math.Floor(grid.WavelengthNM(-0.5)) - beyondNM; nm <= last; nm++ {
		if flux := physics.FluxFromPhotons(perNM(nm), nm); flux > 0 {
			fmt.Fprintf(&text, "%g,%.8g\n", nm, flux)
		}
	}
	return text.Bytes()
}
