package skyflux

import (
	"context"
	"slices"

	"mirrorloom/calib"
)

// look is what one pass through the cube tells of every place, [row][element]: the mean
// over wavelength of its light above the median of its plane, with its variance, 0 where
// too little of the band is good; and the places that stand out in a band of a few voxels.
type look struct {
	picture, variance []float64
	peaks             []bool
}

// bandVoxels of a band: about two widths of a line, so that a line lies whole in one band
// or shows in two.
const bandVoxels = 8

// leastBand is the part of the weight of all wavelengths that a place needs to be judged.
const leastBand = 0.5

// medianPlaces of a plane are enough for its median.
const medianPlaces = 20000

// lookBytes is the memory of a look, for each place: sums of white light and of a band,
// and what calib.SkyRule holds.
const lookBytes = planeBytes + 9*8 + 60

// lookAt makes a look at places that see the whole sky.
func (s *Source) lookAt(ctx context.Context, rule calib.SkyRule, part []float32, progress func(done, total int)) (*look, error) {
	white, band := newMeans(s.places()), newMeans(s.places())
	peaks := rule.NewPeaks(s.places(), s.Elements)
	p := s.newPlane()
	var window medians
	for l := range s.Voxels {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		if err := s.read(p, l); err != nil {
			return nil, err
		}
		p.void(part)
		if level, noise, ok := window.of(p); ok {
			white.add(p, level, 1/noise)
			band.add(p, level, 1/noise)
		}
		if (l+1)%bandVoxels == 0 || l+1 == s.Voxels {
			peaks.Add(band.picture())
			band.clear()
		}
		progress(l+1, s.Voxels)
	}
	out := &look{peaks: peaks.Found()}
	out.picture, out.variance = white.picture()
	return out, nil
}

// wholeSky is the least part of the sky that a place must see to be one of blank sky.
const wholeSky = 0.995

// void takes out of a plane what sees less; nil for nothing.
func (p *plane) void(part []float32) {
	for i, v := range part {
		if v < wholeSky {
			p.flags[i] |= calib.NoData
		}
	}
}

// means are weighted means over planes, by place.
type means struct{ sum, weight, square, values, variances []float64 }

func newMeans(n int) *means {
	return &means{make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)}
}

func (m *means) clear() {
	clear(m.sum)
	clear(m.weight)
	clear(m.square)
}

// add takes the good voxels of a plane, above a level, with a weight.
func (m *means) add(p *plane, level, weight float64) {
	for i, v := range p.signal {
		if p.good(i) {
			m.sum[i] += weight * (float64(v) - level)
			m.weight[i] += weight
			m.square[i] += weight * weight * float64(p.variance[i])
		}
	}
}

// picture gives the means and their variances, 0 where too little was added.
func (m *means) picture() (values, variances []float64) {
	most := slices.Max(m.weight)
	for i, w := range m.weight {
		m.values[i], m.variances[i] = 0, 0
		if w > 0 && w >= leastBand*most {
			m.values[i], m.variances[i] = m.sum[i]/w, m.square[i]/(w*w)
		}
	}
	return m.values, m.variances
}

// medians are those of signal and variance in a plane.
type medians struct{ signal, variance []float32 }

func (m *medians) of(p *plane) (level, noise float64, ok bool) {
	m.signal, m.variance = m.signal[:0], m.variance[:0]
	for i := 0; i < len(p.signal); i += max(1, len(p.signal)/medianPlaces) {
		if p.good(i) {
			m.signal, m.variance = append(m.signal, p.signal[i]), append(m.variance, p.variance[i])
		}
	}
	n := len(m.signal)
	if n < 8 {
		return 0, 0, false
	}
	slices.Sort(m.signal)
	slices.Sort(m.variance)
	return float64(m.signal[n/2]), float64(m.variance[n/2]), true
}
