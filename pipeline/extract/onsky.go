package extract

import (
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// onSky undoes what was done to a cube after it was made, for the errors that come from
// the pixels; and knows the errors that all places share: of the sky's mean light, and of
// the flux that a count stands for. nil for a cube that was left as it is.
type onSky struct {
	sky   *product.SkyRecord
	flux  *product.FluxRecord
	share *fitsutil.Image // weight of each place in the sky, and what part of it each sees
}

func (c *Cube) readOnSky() error {
	done, err := product.ReadOnSky(c.file)
	if err != nil {
		return err
	}
	if done == (product.OnSky{}) {
		return nil
	}
	o := &onSky{sky: done.Sky, flux: done.Flux}
	if o.sky != nil {
		if o.share, err = c.file.ImageNamed(product.SkyShare); err != nil {
			return err
		}
		if o.share.Width() != c.Elements || o.share.Height() != c.Rows || o.share.Planes() != 2 || len(o.sky.Value) != c.signal.Planes() {
			return c.fault("image %s has the axes %v, table %s %d rows", product.SkyShare, o.share.Axes, product.SkyTable, len(o.sky.Value))
		}
	}
	if o.flux != nil && len(o.flux.Factor) != c.signal.Planes() {
		return c.fault("table %s has %d rows", product.FluxTable, len(o.flux.Factor))
	}
	c.onSky = o
	return nil
}

// factor is flux over counts at wavelength l, 1 for a cube in counts, and its relative
// variance.
func (o *onSky) factor(l int) (factor, relative float64) {
	if o == nil || o.flux == nil {
		return 1, 0
	}
	return o.flux.Factor[l], o.flux.RelVariance[l]
}

// skyAt is the sky's light, electrons, and its variance at wavelength l.
func (o *onSky) skyAt(l int) (value, variance float64) {
	if o == nil || o.sky == nil || !(o.sky.Variance[l] >= 0) {
		return 0, 0
	}
	return o.sky.Value[l], o.sky.Variance[l]
}

// inCounts turns rows of SIGNAL from y0 on at wavelength l, in place, into electrons with
// the sky.
func (o *onSky) inCounts(signal []float32, l, y0, elements int) error {
	if o == nil {
		return nil
	}
	factor, _ := o.factor(l)
	sky, _ := o.skyAt(l)
	part := make([]float32, len(signal))
	if o.sky != nil {
		if err := o.share.ReadPlaneRows(part, 1, y0, y0+len(signal)/elements); err != nil {
			return err
		}
	}
	for i, v := range signal {
		signal[i] = float32(float64(v)/factor + float64(part[i])*sky)
	}
	return nil
}

// places reads what the sky has to do with the cells of an aperture.
func (o *onSky) places(a *aperture, elements int) error {
	a.skyPart, a.skyShare = make([]float64, len(a.cells)), make([]float64, len(a.cells))
	if o == nil || o.sky == nil {
		return nil
	}
	row := make([]float32, elements)
	for plane, to := range [][]float64{a.skyShare, a.skyPart} {
		at := -1
		for i, k := range a.cells {
			if k.row != at {
				at = k.row
				if err := o.share.ReadPlaneRows(row, plane, at, at+1); err != nil {
					return err
				}
			}
			to[i] = float64(row[k.element])
		}
	}
	return nil
}

// share of a cell's voxel in the sky's mean.
func (o *onSky) shareOf(a *aperture, i, l int) float64 {
	if o.sky.Weight[l] > 0 && a.flags[i][l]&product.FlagBad == 0 {
		return a.skyShare[i] / o.sky.Weight[l]
	}
	return 0
}

// before gives a voxel's light with the sky, in the cube's unit, and the part of its
// variance that was there before sky and flux, in the square of that unit.
func (o *onSky) before(a *aperture, i, l int) (light, variance float64) {
	light, variance = float64(a.signal[i][l]), float64(a.variance[i][l])
	if o == nil {
		return light, variance
	}
	factor, relative := o.factor(l)
	variance -= light * light * relative
	if o.sky == nil {
		return light, variance
	}
	sky, skyVariance := o.skyAt(l)
	part := a.skyPart[i]
	variance -= factor * factor * part * part * skyVariance
	return light + factor*part*sky, variance / (1 - 2*o.shareOf(a, i, l)*part)
}

// addOnSky adds the errors that all places share. The sky is a mean of voxels of every
// wavelength, which share pixels as an element's do: with the correlations of the
// aperture's middle,
//
//	cov = corr_lm (P_l P_m root(V_l V_m) - P_l X_m - X_l P_m),
//
// V the sky's variance, P the weight with which the aperture sees the sky and X what its own
// voxels have in it. The flux's error is taken to be the same at all wavelengths: it is
// smooth.
func (p *propagator) addOnSky(out *covariances) error {
	o := p.c.onSky
	if o == nil {
		return nil
	}
	channels := p.c.Grid.Count
	if o.flux != nil {
		light := make([]float64, channels)
		for l := range light {
			_, relative := o.factor(l)
			for i := range p.a.cells {
				if p.a.weight[i][l] != 0 {
					light[l] += p.a.weight[i][l] * float64(p.a.signal[i][l]) * math.Sqrt(max(0, relative))
				}
			}
		}
		p.addShared(out, light)
	}
	if o.sky == nil {
		return nil
	}
	seen, own := make([]float64, channels), make([]float64, channels)
	for l := range channels {
		factor, _ := o.factor(l)
		_, skyVariance := o.skyAt(l)
		if !(skyVariance > 0) {
			continue
		}
		for i := range p.a.cells {
			w := p.a.weight[i][l]
			if w == 0 {
				continue
			}
			_, variance := o.before(p.a, i, l)
			seen[l] += w * factor * p.a.skyPart[i]
			own[l] += w / factor * variance * o.shareOf(p.a, i, l)
		}
	}
	return p.addSky(out, seen, own)
}

// addShared adds an error that is one number for all channels, light being what it does to
// each.
func (p *propagator) addShared(out *covariances, light []float64) {
	addOuter(out.channels, light, 1)
	for i, sum := range p.sums {
		total := 0.0
		for l, v := range light {
			total += sum[l] * v
		}
		out.sums[i] += total * total
	}
}

// addSky adds the sky's part, see addOnSky.
func (p *propagator) addSky(out *covariances, seen, own []float64) error {
	cells := p.a.cells
	middle := cells[len(cells)/2]
	noise := p.c.newSpectrumNoise()
	if err := noise.setRow(middle.row); err != nil {
		return err
	}
	channels := p.c.Grid.Count
	noise.setElement(middle.element, 0, channels)
	root := make([]float64, channels)
	for l := range root {
		root[l] = math.Sqrt(noise.product(l, l))
	}
	for l := range channels {
		_, a := p.c.onSky.skyAt(l)
		for lag := range Lags + 1 {
			m := l + lag
			if m >= channels {
				break
			}
			_, b := p.c.onSky.skyAt(m)
			corr := 1.0
			if lag > 0 {
				if corr = noise.product(l, m) / (root[l] * root[m]); !(corr == corr) { // off the detector
					continue
				}
			}
			v := corr * (seen[l]*seen[m]*math.Sqrt(a*b) - seen[l]*own[m] - own[l]*seen[m])
			out.channels[l][lag] += v
			for i, sum := range p.sums {
				twice := 2.0
				if lag == 0 {
					twice = 1
				}
				out.sums[i] += twice * sum[l] * sum[m] * v
			}
		}
	}
	return nil
}
