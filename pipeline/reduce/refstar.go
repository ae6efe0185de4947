package reduce

import (
	"context"
	"errors"
	"fmt"
	"math"
	"time"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/skyflux"
)

// How the flux is calibrated by this night's frames of a star through one wide element:
// their mean is brought along the trace and to wavelengths as decoded light is, for the
// element that the star stands on, and its response divided out; the rest is
// skyflux.Wide's. Light of closed mirrors is not taken off by all-off frames, which show
// another field: the sky's part goes with the sky of the rows beside the star.

// starName is what run.json calls what the star was seen in.
func (r *reduction) starName() string {
	if use := r.opts.Recipe.Flux.Use; use != useAuto {
		return use
	}
	return fmt.Sprintf("%d refstar frames of %s", len(r.roles.refstars), r.seq.Target.Calibration.RefStar.Name)
}

// fluxOfFrames calibrates by this night's frames of the star.
func (r *reduction) fluxOfFrames(ctx context.Context) (*skyflux.Flux, error) {
	planned := len(r.seq.StepsOf(sequence.RefStar))
	switch have := len(r.roles.refstars); {
	case planned == 0:
		return nil, errors.New("the sequence has no refstar step; plan some with calibration.refstar, or give flux: {use: cube.fits of a run on the star}")
	case have == 0:
		return nil, fmt.Errorf("all %d refstar frames are missing; repeat them, or give flux: {use: cube.fits of a run on the star}", planned)
	case have < planned:
		r.warn("%d of %d refstar frames are missing", planned-have, planned)
	}
	seen, drift, err := r.refstarAir()
	if err != nil {
		return nil, err
	}
	e, scatter, err := r.starExposure(ctx)
	if err != nil {
		return nil, err
	}
	wide, err := r.wideStar(e, seen, drift)
	if err != nil {
		return nil, err
	}
	star, err := wide.Measure(ctx)
	if err != nil {
		return nil, err
	}
	star.FrameError = scatter
	if scatter > starScatter {
		r.warn("the light of the refstar frames differs so much that their mean is uncertain by %.1f %%: clouds, or light lost beside the wide element", 100*scatter)
	}
	flux, err := skyflux.Calibrate(star, r.onSky.table, seen, r.onSky.air, r.seq.Profile, r.edgesNM())
	if err != nil {
		return nil, fmt.Errorf("refstar frames with %s: %w", r.opts.Recipe.Flux.Star, err)
	}
	flux.Report.Frames = len(r.roles.refstars)
	if flux.Report.ElementAssumed {
		r.warn("the spectrum of the reference star does not tell its place in the wide element: it is taken to stand in the middle, to %.2g elements, which is in the error of the flux", flux.Report.ElementError)
	}
	return flux, nil
}

// starScatter is the relative error of the frames' mean light that is worth a warning.
const starScatter = 0.01

// refstarAir is the exposures of the star and its refraction: the mean of tan z towards
// the zenith, east and north, nil where refraction is not asked for.
func (r *reduction) refstarAir() (skyflux.Exposures, *[2]float64, error) {
	star, site := r.seq.Target.Calibration.RefStar, r.seq.Profile.Site
	e := skyflux.Exposures{Seconds: r.seq.Steps[r.roles.refstars[0].Step].ExptimeSeconds}
	bends := r.opts.Recipe.Grid.Refraction == useAuto && r.shift != nil && r.shift.Atmosphere != nil
	frames := map[int]pair.Frame{}
	for _, f := range r.night.Of(sequence.RefStar) {
		frames[f.StepIndex] = f
	}
	var drift [2]float64
	doubtful := 0
	for _, open := range r.roles.refstars {
		f := frames[open.Entry]
		x, computed := f.Airmass, math.NaN()
		if !f.Start.IsZero() {
			middle := f.Start.Add(time.Duration(e.Seconds / 2 * float64(time.Second)))
			computed = physics.TargetAirmass(star.RADeg, star.DecDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg)
			z := physics.ApparentZenithDistance(physics.ZenithDistance(star.RADeg, star.DecDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg))
			sin, cos := math.Sincos(physics.TargetParallacticAngle(star.RADeg, star.DecDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg) * math.Pi / 180)
			tan := math.Tan(z*math.Pi/180) / float64(len(r.roles.refstars))
			drift[0] += tan * sin
			drift[1] += tan * cos
		} else if bends {
			return e, nil, fmt.Errorf("%s has no time, of which the star's refraction follows; add DATE-OBS to its header", open.Name)
		}
		if x != x {
			x = computed
		}
		if !(x >= 0.99) || math.IsInf(x, 0) {
			return e, nil, fmt.Errorf("%s has no air mass, and no time at which the reference star is above the horizon; add AIRMASS or DATE-OBS to its header, and check calibration.refstar's ra_deg (degrees, not hours)", open.Name)
		}
		if math.Abs(x-computed) > airSlack*x {
			doubtful++
		}
		e.Airmasses = append(e.Airmasses, x)
	}
	if doubtful > 0 {
		r.warn("the air mass of %d refstar frames is not that of the star at their time, by more than %.0f %%; that of their headers was taken: check calibration.refstar's position, and its units", doubtful, 100*airSlack)
	}
	if !bends {
		return e, nil, nil
	}
	return e, &drift, nil
}

// starStruckSigmas and starStruckShare: a sample that is above the mean of the others by more
// than so many sigmas, and so much of it, was struck. Seeing changes samples by less.
const (
	starStruckSigmas = 6
	starStruckShare  = 0.5
)

// starExposure is the mean of the star's frames, free of cosmic rays, flattened by the
// pixels' response and with harmless values in bad pixels; and the relative error of the
// mean by which the frames differ. A sample is compared with those of the other frames;
// a frame alone is searched by itself.
func (r *reduction) starExposure(ctx context.Context) (*calib.Exposure, float64, error) {
	m, err := r.masters.whole(r.camera.Rows, r.camera.Columns)
	if err != nil {
		return nil, 0, err
	}
	n := r.camera.Rows * r.camera.Columns
	mean := &calib.Exposure{Columns: r.camera.Columns, Signal: make([]float32, n), Variance: make([]float32, n), Flags: make([]calib.Flag, n)}
	most := make([]float32, n) // the largest of the samples
	var totals []float64
	frames := r.roles.refstars
	for k, f := range frames {
		if err := ctx.Err(); err != nil {
			return nil, 0, err
		}
		e, err := r.lampExposure(f, m, false, new(exposure.Scratch))
		if err != nil {
			return nil, 0, err
		}
		if len(frames) == 1 {
			if err := r.cleanAlone(e); err != nil {
				return nil, 0, err
			}
		}
		total := 0.0
		for i, v := range e.Signal {
			mean.Signal[i] += v
			mean.Variance[i] += e.Variance[i]
			mean.Flags[i] |= e.Flags[i]
			if k == 0 || v > most[i] {
				most[i] = v
			}
			if e.Flags[i] == 0 {
				total += float64(v)
			}
		}
		totals = append(totals, total)
	}
	count, photon := float32(len(frames)), float32(1+r.camera.PhotonExcess)
	for i := range mean.Signal {
		own := count
		if count > 1 {
			others := (mean.Signal[i] - most[i]) / (count - 1)
			quiet := float32(r.camera.Variance[i/r.camera.Columns][i%r.camera.Columns])
			noise := (quiet + photon*max(0, others)) * count / (count - 1)
			if above := most[i] - others; above > starStruckSigmas*float32(math.Sqrt(float64(noise))) && above > starStruckShare*others {
				own--
				mean.Signal[i] -= most[i]
				mean.Variance[i] -= photon*max(0, most[i]) + quiet
			}
		}
		mean.Signal[i] /= own
		mean.Variance[i] /= own * own
		if !(mean.Variance[i] > 0) {
			mean.Variance[i] = float32(r.camera.Variance[i/r.camera.Columns][i%r.camera.Columns]) / own
		}
	}
	r.flattenStar(mean)
	return mean, relativeScatter(totals), nil
}

// cleanAlone takes cosmic rays out of one frame by their edges.
func (r *reduction) cleanAlone(e *calib.Exposure) error {
	noise := calib.FrameNoise{Photon: 1 + r.camera.PhotonExcess, Read: make([]float32, 0, len(e.Signal))}
	for _, row := range r.camera.Variance {
		for _, v := range row {
			noise.Read = append(noise.Read, float32(v))
		}
	}
	strikes, err := calib.DefaultEdgeRule().Find(e.Signal, e.Columns, noise, e.Flags)
	for _, s := range strikes {
		e.Flags[s.Pixel] |= calib.BadPixel
	}
	return err
}

// flattenStar divides by the pixels' response and fills bad pixels.
func (r *reduction) flattenStar(e *calib.Exposure) {
	var fill calib.Fill
	for y := range r.camera.Rows {
		row := func(x []float32) []float32 { return x[y*e.Columns : (y+1)*e.Columns] }
		flags := e.Flags[y*e.Columns : (y+1)*e.Columns]
		if p := r.optics.pixel; p != nil {
			p.Divide(row(e.Signal), row(e.Variance), y*e.Columns)
			_, _, low := p.Row(y)
			for x, f := range low {
				flags[x] |= f
			}
		}
		fill.Plan(flags, calib.BadPixel|calib.Saturated|calib.NoData)
		fill.Signal(row(e.Signal))
		fill.Variance(row(e.Variance))
	}
}

// relativeScatter is the standard error of a mean over the mean; 0 for one value.
func relativeScatter(x []float64) float64 {
	n := float64(len(x))
	if n < 2 {
		return 0
	}
	sum, squares := 0.0, 0.0
	for _, v := range x {
		sum += v
	}
	for _, v := range x {
		squares += (v - sum/n) * (v - sum/n)
	}
	if !(sum > 0) {
		return 0
	}
	return math.Sqrt(squares/(n-1)/n) / (sum / n)
}

// mostBeyond voxels at either end of the grid are looked at for the ends of the band.
const mostBeyond = 60

// wideStar makes of an exposure what skyflux measures. drift is refstarAir's.
func (r *reduction) wideStar(e *calib.Exposure, seen skyflux.Exposures, drift *[2]float64) (*skyflux.Wide, error) {
	first, last, ok := r.seq.WideElement(r.roles.refstars[0].Step)
	if !ok {
		return nil, fmt.Errorf("step %d opens no neighbouring elements", r.seq.Steps[r.roles.refstars[0].Step].Step)
	}
	edges, beyond := r.beyond(r.edgesNM(), first, last)
	g, night := r.rectifier.geometry, product.NewSchema(r.seq)
	n := len(edges) - 1
	w := &skyflux.Wide{
		Edges: edges, Beyond: beyond, First: first, Last: last, Usable: r.evenRows(first, last),
		ElementArcsec: 3600 * night.C1Deg, RowArcsec: 3600 * night.C2Deg, RadiusArcsec: r.opts.Recipe.Flux.RadiusArcsec,
	}
	atEdges := make([]float64, n+1)
	if drift != nil {
		x0, _ := night.Place(0, 0)
		for i, nm := range edges {
			up := r.shift.Atmosphere.DifferentialRefraction(nm, r.shift.GuideNM, 45)
			x, _ := night.Place(up*drift[0], up*drift[1])
			atEdges[i] = x - x0
		}
		w.Drift = make([]float64, n)
		for l := range w.Drift {
			w.Drift[l] = (atEdges[l] + atEdges[l+1]) / 2
		}
	}
	middle := float64(first+last) / 2
	w.BlurRows = r.seq.Profile.Spectrograph.LSFFWHMPx / fwhmSigmas
	w.Blur, w.Slope = make([]float64, n), make([]float64, n)
	for l := range n {
		px := g.X(middle, g.Y_c, edges[l+1]) - g.X(middle, g.Y_c, edges[l])
		w.Blur[l], w.Slope[l] = r.seq.Profile.Spectrograph.LSFFWHMPx/fwhmSigmas/math.Abs(px), g.X_e/px
	}
	w.Model = r.starModel(edges, seen)
	w.Row = r.starRow(e, edges, atEdges)
	w.Response = func(int, int, int) float64 { return 1 }
	if response := r.rectifier.response; response != nil {
		w.Response = func(element, y, voxel int) float64 {
			f, _, _ := response.At(element, y, voxel)
			return float64(f)
		}
	}
	r.besideOpen(w)
	at := make([]float64, n+1)
	for i, nm := range edges {
		at[i] = g.X(middle, g.Y_c, nm)
	}
	along, slit := calib.Correlation(r.rectifier.shift, r.rectifier.columns, at, r.camera.Rows/2)
	w.Correlated = along * slit
	if !(w.Correlated >= 1) {
		w.Correlated = 1
	}
	return w, nil
}
