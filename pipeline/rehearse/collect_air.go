package rehearse

import (
	"math"

	"mirrorloom/calib/physics"
)

// addThrough puts on d the continuum of an emitter behind air that a mirror sends on.
// Each wavelength's image falls where refraction moves it: the mirror's share is looked
// up at the nodes of air and interpolated at each point of the band.
func (o *optics) addThrough(d *density, e *emitter, m *mirrorRow, column, row int, across float64) {
	l, b := e.sight, e.band
	c, w := float64(column), float64(row)
	share := 0.0
	if l.tanZ == 0 {
		if share = e.image.fraction(c, w); share <= leastFraction {
			return
		}
	} else if !l.nodeShares(d, e.image, c, w) {
		return
	}
	if len(d.shaped) < len(b.rate) {
		d.shaped = make([]float64, len(b.rate))
	}
	shaped := d.shaped[:len(b.rate)]
	// The band's points that the drawing grid looks at.
	from := min(max(int(math.Floor((m.start[0]-across-b.first)/bandStep)), 0), len(shaped)-1)
	to := min(max(int(math.Floor((m.start[len(m.start)-1]-across-b.first)/bandStep))+2, 0), len(shaped))
	for k := from; k < to; k++ {
		p := share
		if l.tanZ != 0 {
			at := &l.air.places[b.index+k]
			s := d.shares[at.first : at.first+4]
			p = at.weight[0]*s[0] + at.weight[1]*s[1] + at.weight[2]*s[2] + at.weight[3]*s[3]
		}
		shaped[k] = b.rate[k] * l.left[b.index+k] * p
	}
	moved := band{first: b.first, rate: shaped}
	d.touch(moved.add(d.h, 1, m.start, across))
}

// nodeShares fills d.shares with a mirror's share of an image at the nodes; false where
// there is none worth drawing.
func (l *sightline) nodeShares(d *density, im image, column, row float64) bool {
	a := l.air
	if len(d.shares) < a.nodes {
		d.shares = make([]float64, a.nodes)
	}
	largest := 0.0
	for i := range d.shares[:a.nodes] {
		moved := l.tanZ * (a.node0 + float64(i)*a.nodeStep)
		d.shares[i] = im.fraction(column-moved*l.column, row-moved*l.row)
		largest = max(largest, d.shares[i])
	}
	return largest > leastFraction
}

// addLinesThrough puts on d the lines of an emitter behind air that mirror u of a row
// sends on.
func (o *optics) addLinesThrough(d *density, e *emitter, efficiency func(float64) float64, m *mirrorRow, column, row, u int) {
	l := e.sight
	across := o.geometry.across(float64(u))
	for _, line := range e.lines {
		nm := line.nm
		if e.motion != nil {
			// The mirror looks at the sky from which refraction brought the light.
			nm *= physics.DopplerFactor(e.motion.systemic)
			_, moved := l.at(o.geometry.dispersed(nm))
			east, north := o.field.skyOf(u, m.w)
			nm = line.nm * physics.DopplerFactor(e.motion.at(east-moved*l.east, north-moved*l.north))
		}
		left, moved := l.at(o.geometry.dispersed(nm))
		if p := e.image.fraction(float64(column)-moved*l.column, float64(row)-moved*l.row); p > leastFraction {
			o.addLine(d, nm, p*left*line.photons*efficiency(nm), line.fwhmKmS, across, m)
		}
	}
}
