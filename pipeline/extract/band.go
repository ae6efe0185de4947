package extract

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"mirrorloom/pipeline/instrument"
)

// Band is a range of vacuum wavelengths with the side bands of its continuum.
type Band struct {
	FromNM, ToNM float64
	// Sides are ranges whose mean, over all of them, is taken for the continuum; none
	// to leave it in.
	Sides [][2]float64
}

// BandLight is the light of an aperture in a band.
type BandLight struct {
	FromNM, ToNM float64
	Sides        [][2]float64
	Signal       float64
	Error, Naive float64
	Unit         string
}

// ParseBand reads "499.8-502.3".
func ParseBand(text string) (Band, error) {
	r, err := parseRange(text)
	return Band{FromNM: r[0], ToNM: r[1]}, err
}

// ParseSides reads "495-498,504-507".
func ParseSides(text string) ([][2]float64, error) {
	var sides [][2]float64
	for _, part := range strings.Split(text, ",") {
		r, err := parseRange(part)
		if err != nil {
			return nil, err
		}
		sides = append(sides, r)
	}
	return sides, nil
}

func parseRange(text string) (r [2]float64, err error) {
	from, to, _ := strings.Cut(strings.TrimSpace(text), "-")
	a, errA := strconv.ParseFloat(from, 64)
	b, errB := strconv.ParseFloat(to, 64)
	if errA != nil || errB != nil || !(a > 0 && b > a && b < math.MaxFloat32) {
		return r, fmt.Errorf("wavelengths %q are no range of vacuum nm such as 499.8-502.3", text)
	}
	return [2]float64{a, b}, nil
}

// overlap is the part of each voxel that lies in a range of wavelengths.
func overlap(g instrument.Grid, fromNM, toNM float64) []float64 {
	part := make([]float64, g.Count)
	for l := range part {
		a, b := g.WavelengthNM(float64(l)-0.5), g.WavelengthNM(float64(l)+0.5)
		if a > b {
			a, b = b, a
		}
		part[l] = max(0, min(b, toNM)-max(a, fromNM)) / (b - a)
	}
	return part
}

// weights of the channels in a band's light: 1 inside, for voxels that the band
// cuts their part, less the continuum. The error says that the grid does not hold
// the band.
func (b Band) weights(g instrument.Grid) ([]float64, error) {
	first, last := min(g.WavelengthNM(-0.5), g.WavelengthNM(float64(g.Count)-0.5)), max(g.WavelengthNM(-0.5), g.WavelengthNM(float64(g.Count)-0.5))
	for _, r := range append([][2]float64{{b.FromNM, b.ToNM}}, b.Sides...) {
		if r[0] < first || r[1] > last {
			return nil, fmt.Errorf("the band of %g to %g nm reaches beyond the cube's %.5g to %.5g nm (vacuum)", r[0], r[1], first, last)
		}
	}
	w := overlap(g, b.FromNM, b.ToNM)
	width := total(w)
	side := make([]float64, g.Count)
	for _, r := range b.Sides {
		for l, part := range overlap(g, r[0], r[1]) {
			side[l] += part
		}
	}
	if voxels := total(side); voxels > 0 {
		for l := range w {
			w[l] -= width / voxels * side[l]
		}
	}
	return w, nil
}

func total(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v
	}
	return sum
}

// perNM tells whether a unit is that of a flux density.
func perNM(unit string) bool { return strings.HasSuffix(unit, "nm-1") }

// bandUnit is the unit of a sum over channels: that of a density times nm.
func bandUnit(unit string) string { return strings.TrimSpace(strings.TrimSuffix(unit, "nm-1")) }

// add gives the band's light in a spectrum, and its channels' weights.
func (b Band) add(s *Spectrum, g instrument.Grid, unit string) (BandLight, []float64, error) {
	light := BandLight{FromNM: b.FromNM, ToNM: b.ToNM, Sides: b.Sides, Unit: bandUnit(unit)}
	w, err := b.weights(g)
	if err != nil {
		return light, nil, err
	}
	if perNM(unit) {
		for l := range w {
			w[l] *= math.Abs(g.WidthNM(l))
		}
	}
	for l, v := range w {
		if v != 0 {
			light.Signal += v * s.Signal[l]
			light.Naive += v * v * s.Naive[l] * s.Naive[l]
		}
	}
	light.Naive = math.Sqrt(light.Naive)
	return light, w, nil
}
