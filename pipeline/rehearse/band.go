package rehearse

import "math"

// band is a continuum as it lies along the dispersion: detected electrons per
// second and pixel of an emitter of fraction 1, as a function of the dispersed
// distance px (d1 l + d2 l^2 + d3 l^3), tabulated every bandStep and linear
// between. Points hold the mean over their step, so that the light of every
// feature is kept.
type band struct {
	first float64 // px of rate[0]
	index int     // of rate[0] among the points of all dispersed distances
	rate  []float64
}

const bandStep = 0.25

// newBand tabulates a photon spectrum times the efficiency, in electrons per
// second and nm, for dispersed distances from..to. Between the points that see
// light it is trimmed.
func (g *Geometry) newBand(perNM func(nm float64) float64, from, to float64) *band {
	n := int(math.Ceil((to-from)/bandStep)) + 2
	edges := make([]float64, n+1)
	for i := range edges {
		edges[i] = math.NaN()
		if nm, ok := g.wavelength(from + (float64(i)-0.5)*bandStep); ok {
			edges[i] = nm
		}
	}
	rate := make([]float64, n)
	first, last := n, -1
	for i := range rate {
		if math.IsNaN(edges[i]) || math.IsNaN(edges[i+1]) {
			continue
		}
		rate[i] = math.Abs(integral(perNM, edges[i], edges[i+1])) / bandStep
		if rate[i] > 0 {
			first, last = min(first, i), i
		}
	}
	if last < 0 {
		return nil
	}
	first, last = max(first-1, 0), min(last+1, n-1)
	return &band{first: from + float64(first)*bandStep, index: first, rate: rate[first : last+1]}
}

// integral is int f from a to b, by Gauss's rule of two points in four equal
// parts: the steps are short against all but the finest tables of spectra.
func integral(f func(float64) float64, a, b float64) float64 {
	const parts = 4
	node := 0.5 / math.Sqrt(3)
	sum, h := 0.0, (b-a)/parts
	for i := range parts {
		middle := a + (float64(i)+0.5)*h
		sum += f(middle-node*h) + f(middle+node*h)
	}
	return sum * h / 2
}

// add adds p times the band to h, where point i of h lies at the dispersed
// distance start[i] - across. start ascends. The points touched are
// from <= i < to.
func (b *band) add(h []float64, p float64, start []float64, across float64) (from, to int) {
	origin := b.first + across
	end := origin + float64(len(b.rate)-1)*bandStep
	from, to = firstAbove(start, origin), firstAbove(start, end)
	const perStep = 1 / bandStep
	rate := b.rate
	for i := from; i < to; i++ {
		at := (start[i] - origin) * perStep
		k := int(at)
		low := rate[k]
		h[i] += p * (low + (rate[k+1]-low)*(at-float64(k)))
	}
	return from, to
}

// firstAbove is the index of the first value not below x of an ascending list
// whose values are nearly gridStep apart.
func firstAbove(list []float64, x float64) int {
	n := len(list)
	i := min(max(int((x-list[0])/gridStep), 0), n)
	for i > 0 && list[i-1] >= x {
		i--
	}
	for i < n && list[i] < x {
		i++
	}
	return i
}
