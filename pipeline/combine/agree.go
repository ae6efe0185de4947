package combine

import (
	"errors"
	"fmt"
	"math"

	"mirrorloom/pipeline/product"
)

// wholeWithin is how far, in voxels, two runs' voxels may lie from each other on the sky
// and still be taken for the same: a hundredth displaces half of a star's light by less
// than the noise of one that has a S/N of 100 in a voxel.
const wholeWithin = 0.01

// agree refuses runs whose voxels are not the same thing, in one sentence that names
// them and the cure.
func agree(a, b *member) error {
	refuse := func(format string, args ...any) error {
		return fmt.Errorf("%s and %s cannot be combined: %s", a.name, b.name, fmt.Sprintf(format, args...))
	}
	if pa, pb := a.card("PROFNAME"), b.card("PROFNAME"); pa != pb {
		return refuse("they are of the instruments %q and %q; combine runs of one instrument", pa, pb)
	}
	if ua, ub := a.card("BUNIT"), b.card("BUNIT"); ua != ub {
		return refuse("their units are %s and %s; reduce both with the flux calibration, or both without", ua, ub)
	}
	if sa, sb := a.card("SKYTAKEN"), b.card("SKYTAKEN"); (sa == "") != (sb == "") {
		return refuse("the sky was subtracted from one of them alone; reduce both with the same `sky` in the recipe")
	}
	ga, gb := a.schema.Grid, b.schema.Grid
	same := func(x, y float64) bool { return math.Abs(x-y) <= 1e-9*math.Abs(x) }
	if ga.Axis != gb.Axis || ga.Spacing != gb.Spacing || ga.Count != gb.Count || !same(ga.FirstNM, gb.FirstNM) || !same(ga.StepNM, gb.StepNM) {
		return refuse("their wavelengths differ (%d voxels from %g nm on by %g nm, and %d from %g nm on by %g nm, %s and %s); reduce both with the same `grid` in the recipe",
			ga.Count, ga.FirstNM, ga.StepNM, gb.Count, gb.FirstNM, gb.StepNM, a.card("CTYPE3"), b.card("CTYPE3"))
	}
	if fa, fb := a.schema.Frame.Name, b.schema.Frame.Name; fa != fb {
		return refuse("their wavelengths are in the frames %s and %s; reduce both with the same `grid: {frame: ...}` in the recipe", fa, fb)
	}
	if ta, tb := a.dwell(), b.dwell(); a.card("BUNIT") == product.UnitSignal && ta > 0 && tb > 0 && !same(ta, tb) {
		return refuse("their electrons are those of exposures of %g s and %g s; reduce both with the flux calibration", ta, tb)
	}
	err := b.place(a)
	if errors.Is(err, errApart) {
		return refuse("%v; combine runs of one field", err)
	}
	if err != nil {
		return refuse("%v; reduce %s onto the voxels of the other, with `grid: {onto: %s/%s}` in the recipe", err, b.name, a.name, product.CubeFile)
	}
	return nil
}

var errApart = errors.New("their fields do not overlap")

// place finds where the first voxel of b lies in a. The error says how they differ.
func (b *member) place(a *member) error {
	if pa, pb := a.schema.Parity, b.schema.Parity; pa != pb {
		return fmt.Errorf("their fields have the parities %d and %d", pa, pb)
	}
	for _, s := range []struct {
		axis   string
		ca, cb float64
	}{{"elements", a.schema.C1Deg, b.schema.C1Deg}, {"rows", a.schema.C2Deg, b.schema.C2Deg}} {
		if math.Abs(s.ca-s.cb) > 1e-6*s.ca {
			return fmt.Errorf("their %s are %.5g and %.5g arc seconds apart", s.axis, 3600*s.ca, 3600*s.cb)
		}
	}
	j, y := b.at(a, 0, 0)
	within := func(x float64, own, other int) bool { return x > -float64(own) && x < float64(other) }
	if !within(j, b.width(), a.width()) || !within(y, b.height(), a.height()) {
		return errApart
	}
	for _, c := range [][2]int{{b.width() - 1, 0}, {0, b.height() - 1}, {b.width() - 1, b.height() - 1}} {
		jc, yc := b.at(a, c[0], c[1])
		if d := math.Hypot(jc-j-float64(c[0]), yc-y-float64(c[1])); !(d <= wholeWithin) {
			return fmt.Errorf("their fields are turned against each other by %.3g degrees, so that corners lie %.2g voxels apart", turn(a, b), d)
		}
	}
	b.element, b.row = int(math.Round(j)), int(math.Round(y))
	if d := math.Hypot(j-float64(b.element), y-float64(b.row)); d > wholeWithin {
		return fmt.Errorf("their voxels do not coincide: the first of %s is element %.2f, row %.2f of %s", b.name, j, y, a.name)
	}
	return nil
}

// at is where in a an element and row of b lie.
func (b *member) at(a *member, element, row int) (float64, float64) {
	ra, dec := b.schema.Sky(float64(element), float64(row))
	return a.schema.PlaceOf(ra, dec)
}

func turn(a, b *member) float64 {
	return math.Remainder(b.schema.RotangDeg-a.schema.RotangDeg, 360)
}
