package forecast

import "math"

// table is light by the dispersed distance, px from where the light of the centre wavelength
// of a mirror in the field's middle lands: electrons a second in the pixel centred there,
// for a piece all of whose light is taken.
type table struct {
	first, step float64
	value       []float64
	// stride steps are the shift from one u to the next; below[i] is the sum of value[i - m
	// stride] over m = 0, 1, 2, ... .
	stride int
	below  []float64
}

// at interpolates between points, 0 beyond.
func (t *table) at(px float64) float64 {
	p := (px - t.first) / t.step
	i := int(math.Floor(p))
	if i < 0 || i+1 >= len(t.value) {
		return 0
	}
	low := t.value[i]
	return low + (t.value[i+1]-low)*(p-float64(i))
}

// sum is that of at(px), at(px - u), ..., at(px - (count-1) u), u the shift of a stride.
func (t *table) sum(px float64, count int) float64 {
	p := (px - t.first) / t.step
	i := int(math.Floor(p))
	part := p - float64(i)
	beyond := i - count*t.stride
	low := t.downFrom(i) - t.downFrom(beyond)
	high := t.downFrom(i+1) - t.downFrom(beyond+1)
	return low + (high-low)*part
}

// downFrom is below[i], which beyond the table goes on as the light ends there.
func (t *table) downFrom(i int) float64 {
	if i < 0 {
		return 0
	}
	if n := len(t.below); i >= n {
		i -= (i - n + t.stride) / t.stride * t.stride
	}
	if i < 0 {
		return 0
	}
	return t.below[i]
}

// tableStep is how finely spectra are tabulated, px: a line of FWHM 3 px read linearly errs
// by 1e-3 of its peak.
const tableStep = 0.12

// newTable lays a table out from px a to px b with u_step a whole number of its steps.
func newTable(a, b, uStep float64) *table {
	u := math.Abs(uStep)
	stride := max(1, int(math.Ceil(u/tableStep)))
	t := &table{first: a, step: u / float64(stride), stride: stride}
	t.value = make([]float64, int((b-a)/t.step)+2)
	return t
}

// finish spreads what lies at the table's points, electrons a second each, by the spot of
// width sigma over pixels, and prepares sums.
func (t *table) finish(sigma float64) {
	half := int(math.Ceil((6*sigma + 0.5) / t.step))
	kernel := make([]float64, 2*half+1)
	for i := range kernel {
		d := float64(i-half) * t.step
		kernel[i] = between(d-0.5, d+0.5, sigma)
	}
	spread := make([]float64, len(t.value))
	for i, v := range t.value {
		if v == 0 {
			continue
		}
		from, to := max(i-half, 0), min(i+half+1, len(spread))
		for k := from; k < to; k++ {
			spread[k] += v * kernel[k-i+half]
		}
	}
	t.value = spread
	t.below = make([]float64, len(spread))
	for i := range spread {
		t.below[i] = spread[i]
		if i >= t.stride {
			t.below[i] += t.below[i-t.stride]
		}
	}
}

// put adds electrons at px, shared among the two points about it: the mean place is kept.
func (t *table) put(px, electrons float64) {
	p := (px - t.first) / t.step
	i := int(math.Floor(p))
	if i < 0 || i+1 >= len(t.value) {
		return
	}
	part := p - float64(i)
	t.value[i] += electrons * (1 - part)
	t.value[i+1] += electrons * part
}

// line is an emission line of a piece: electrons a second where all its light is taken.
type line struct {
	nm, px, sigma, electrons float64
	// perKmS is the shift, px, of a velocity.
	perKmS float64
	// profile is the part that falls in a pixel, by the distance of its centre from the
	// line's, every 1/lineSteps px from -half.
	profile []float64
	half    float64
}

// lineSteps a pixel make a line's profile, read linearly, good to 1e-4 of its peak.
const lineSteps = 32

// shape tabulates the profile.
func (l *line) shape() {
	n := int(math.Ceil((6*l.sigma + 0.5) * lineSteps))
	l.half = float64(n) / lineSteps
	l.profile = make([]float64, 2*n+1)
	for i := range l.profile {
		d := float64(i-n) / lineSteps
		l.profile[i] = between(d-0.5, d+0.5, l.sigma)
	}
}

// at is what falls in the pixel whose centre lies at a dispersed distance.
func (l *line) at(px, kmS float64) float64 {
	p := (px - l.px - kmS*l.perKmS + l.half) * lineSteps
	i := int(p)
	if p < 0 || i+1 >= len(l.profile) {
		return 0
	}
	low := l.profile[i]
	return l.electrons * (low + (l.profile[i+1]-low)*(p-float64(i)))
}
