package reduce

import (
	"fmt"
	"math"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
)

// moment is when a science frame was taken.
type moment struct {
	middle  time.Time // UTC, of the exposure
	seconds float64   // exposed
	frame   *exposure.Frame
}

// moments are those of the science frames used, in the order of code rows. The error
// names the frame that does not say when it was taken.
func (r *reduction) moments() ([]moment, error) {
	var all []moment
	for _, frames := range r.roles.slots {
		for _, f := range frames {
			date := r.night.Ledger[f.Entry].DateObs
			if date == "" {
				return nil, fmt.Errorf("frame %s has no %s", f.Name, r.seq.Profile.Keywords.DateObs)
			}
			start, err := pair.ParseDateObs(date)
			if err != nil {
				return nil, fmt.Errorf("frame %s: %s %w", f.Name, r.seq.Profile.Keywords.DateObs, err)
			}
			seconds := r.seq.Steps[f.Step].ExptimeSeconds
			all = append(all, moment{start.Add(time.Duration(seconds / 2 * float64(time.Second))), seconds, f})
		}
	}
	if len(all) == 0 {
		return nil, fmt.Errorf("there is no science frame")
	}
	return all, nil
}

// setFrame gives the cube's wavelengths their standard of rest: that of the recipe, or of
// the cube whose voxels are wanted. The mean factor of the
// exposures serves all of them: the observer's velocity changes by some 0.1 km/s an hour,
// a thousandth of a voxel.
func (r *reduction) setFrame(onto *product.Schema) {
	wanted := r.opts.Recipe.Grid.Frame
	if onto != nil {
		wanted = frameOf(onto.Frame)
	}
	if wanted != frameBarycentric {
		return
	}
	moments, err := r.moments()
	if err != nil {
		r.degrade("wavelengths are those of the observatory, not of the barycentre: %v; give the frames their time, or leave out grid.frame", err)
		return
	}
	site, target := r.seq.Profile.Site, r.seq.Target
	sum, weight := 0.0, 0.0
	for _, m := range moments {
		v := physics.BarycentricVelocity(target.RADeg, target.DecDeg, m.middle, site.LatitudeDeg, site.LongitudeEastDeg, site.HeightM)
		sum += m.seconds * v.Factor
		weight += m.seconds
	}
	if factor := sum / weight; math.Abs(factor-1) < 1 {
		r.schema.Frame = product.SpectralFrame{Name: product.Barycentric, Factor: factor}
	}
}
