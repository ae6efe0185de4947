package reduce

import (
	"fmt"
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// sameWidth bounds how far a measured element's width is from the profile's: scales
// drift by some per cent, while the next element is wider by a mirror.
const sameWidth = 0.1

// borrowGeometry takes the geometry of another run's cube.fits.
func (r *reduction) borrowGeometry(path string) error {
	f, err := fitsutil.Open(path)
	if err != nil {
		return err
	}
	defer f.Close()
	table, err := f.Table(product.Dispersion)
	if err != nil {
		return err
	}
	if name, err := f.HDUs()[0].Header.Str("PROFNAME"); err != nil || name != r.seq.ProfileName {
		return fmt.Errorf("%s is of the instrument %q, not %q", path, name, r.seq.ProfileName)
	}
	var g calib.Geometry
	if err := product.ReadGeometry(table.Header, g.Parameters()); err != nil {
		return err
	}
	if elements, err := f.HDUs()[1].Header.Int("NAXIS1"); err != nil || int(elements) != r.seq.N() {
		return fmt.Errorf("%s has %d elements, not %d: the geometry counts in elements", path, elements, r.seq.N())
	}
	lines, err := table.Int32s("NLINES")
	if err != nil {
		return err
	}
	if !slices.ContainsFunc(lines, func(n int32) bool { return n > 0 }) {
		return fmt.Errorf("%s has the profile's own wavelengths, which no arc line backs; use a run whose arcs were fitted", path)
	}
	nominal := r.optics.geometry
	if width := g.X_e / nominal.X_e; !(math.Abs(width-1) < sameWidth) {
		return fmt.Errorf("%s has elements of %.3g px, not %.3g: use the run of a sequence with elements as wide", path, g.X_e, nominal.X_e)
	}
	r.optics.geometry = g
	if err := r.checkGrid(); err != nil {
		r.optics.geometry = nominal
		return fmt.Errorf("%s: %w", path, err)
	}
	return nil
}
