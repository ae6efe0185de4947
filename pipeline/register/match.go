package register

import (
	"math"

	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// A target of matching: a listed star in the plane that touches the sky at the field's
// centre, arc seconds.
type listed struct {
	star        int
	east, north float64
}

// peak is a measured star along the cube's axes, arc seconds from the field's centre as
// the nominal steps have it.
type peak struct {
	calib.Centroid
	u, w, sigma float64
}

// matcher looks for the map by which most listed stars find a peak.
type matcher struct {
	schema    product.Schema
	stars     []listed
	peaks     []peak
	tolerance float64 // arc seconds
	search    float64 // how far a pointing may be off, arc seconds
	scale     float64 // by how much the scale may be off, for a similarity
}

// sigmaFloor is the least error of a centroid in parts of a voxel: a star is no Gaussian,
// and elements are wide.
const sigmaFloor = 0.01

func newPeaks(found []calib.Centroid, s product.Schema) []peak {
	var all []peak
	centre := float64(s.Elements-1)/2 + s.ElementShift
	for _, c := range found {
		c1, c2 := 3600*s.C1Deg, 3600*s.C2Deg
		sj, sy := max(c.ElementErr, sigmaFloor)*c1, max(c.RowErr, sigmaFloor)*c2
		all = append(all, peak{c, (c.Element - centre) * c1, (c.Row - s.RowCenter) * c2, math.Sqrt((sj*sj + sy*sy) / 2)})
	}
	return all
}

// nominal is the map of the cube's own world coordinates, from u and w to the plane.
func (m *matcher) nominal() calib.PlaneMap {
	return similarity(1, m.schema.RotangDeg*math.Pi/180, float64(m.schema.Parity), 0, 0)
}

// similarity is east = e - p a u + b w, north = n + p b u + a w, where a and b are scale
// times cosine and sine of the position angle of +w.
func similarity(scale, angle, parity, east, north float64) calib.PlaneMap {
	a, b := scale*math.Cos(angle), scale*math.Sin(angle)
	return calib.PlaneMap{East: [3]float64{east, -parity * a, b}, North: [3]float64{north, parity * b, a}}
}

// pointing tries shifts of the nominal map: each that brings a star on a peak.
func (m *matcher) pointing() (best calib.PlaneMap) {
	most := 0.0
	for _, s := range m.stars {
		for _, p := range m.peaks {
			e, n := m.nominal().At(p.u, p.w)
			if math.Hypot(s.east-e, s.north-n) > m.search {
				continue
			}
			try := m.nominal()
			try.East[0], try.North[0] = s.east-e, s.north-n
			if v := m.votes(try); v > most {
				best, most = try, v
			}
		}
	}
	return best
}

// patternPeaks is how many of the brightest peaks take part in pairs.
const patternPeaks = 20

// turned tries similarities: each that brings two stars on two peaks, of either parity,
// with a scale that is not too far off.
func (m *matcher) turned() (best calib.PlaneMap) {
	most := 0.0
	few := m.peaks[:min(len(m.peaks), patternPeaks)]
	for a, s := range m.stars {
		for _, t := range m.stars[a+1:] {
			de, dn := t.east-s.east, t.north-s.north
			length := math.Hypot(de, dn)
			if length < 4*m.tolerance {
				continue // the angle would be loose
			}
			for i, p := range few {
				for k, q := range few {
					du, dw := q.u-p.u, q.w-p.w
					scale := length / math.Hypot(du, dw)
					if i == k || !(math.Abs(scale-1) <= m.scale) {
						continue
					}
					for _, parity := range []float64{1, -1} {
						// Both as position angles; the cube's own runs towards -u.
						angle := math.Atan2(de, dn) - math.Atan2(-parity*du, dw)
						try := similarity(scale, angle, parity, 0, 0)
						e, n := try.At(p.u, p.w)
						try.East[0], try.North[0] = s.east-e, s.north-n
						if v := m.votes(try); v > most {
							best, most = try, v
						}
					}
				}
			}
		}
	}
	return best
}

// votes are those of the stars that find a peak by a map: 1 of a star that is right on it,
// falling to 0 at the tolerance.
func (m *matcher) votes(try calib.PlaneMap) (sum float64) {
	for _, s := range m.stars {
		if _, d := m.nearest(try, s); d < m.tolerance {
			sum += 1 - d*d/(m.tolerance*m.tolerance)
		}
	}
	return sum
}

// nearest is the peak next to a star, and how far it is.
func (m *matcher) nearest(by calib.PlaneMap, s listed) (at int, distance float64) {
	distance, at = math.Inf(1), -1
	for i, p := range m.peaks {
		e, n := by.At(p.u, p.w)
		if d := math.Hypot(e-s.east, n-s.north); d < distance {
			distance, at = d, i
		}
	}
	return at, distance
}

// pairs are the stars with a peak by a map: star and peak. A peak serves the star that is
// nearer.
func (m *matcher) pairs(by calib.PlaneMap) [][2]int {
	owner := map[int][2]int{} // by peak: place in the list of pairs, and star
	var all [][2]int
	for i, s := range m.stars {
		at, d := m.nearest(by, s)
		if d > m.tolerance {
			continue
		}
		if o, taken := owner[at]; taken {
			if _, other := m.nearest(by, m.stars[o[1]]); other <= d {
				continue
			}
			all[o[0]] = [2]int{i, at}
			owner[at] = [2]int{o[0], i}
			continue
		}
		owner[at] = [2]int{len(all), i}
		all = append(all, [2]int{i, at})
	}
	return all
}
