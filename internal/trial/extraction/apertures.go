package extraction

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// aperture is one that is tried, with its running moments by channel.
type aperture struct {
	name    string
	options extract.SpectrumOptions
	// mean and square are those of Signal (Welford's update), quoted and naive the
	// sums of the squared errors.
	mean, square, quoted, naive []float64
	bad                         []bool
	// The same of its band.
	band moments
}

type moments struct{ mean, square, quoted, naive float64 }

// apertures are 20 on the square field: circles, ellipses, polygons and lists, on
// stars and beside them, of one voxel up to a tenth of the field.
func apertures() ([]*aperture, error) {
	var all []*aperture
	var failed error
	add := func(name string, s *extract.Shape, err error) *aperture {
		if err != nil {
			failed = fmt.Errorf("%s: %w", name, err)
		}
		a := &aperture{name: name, options: extract.SpectrumOptions{Aperture: s}}
		all = append(all, a)
		return a
	}
	for i, text := range []string{"8.8 34.5 1.0", "8.8 34.5 2.5", "36.7 32.8 1.5", "23.7 23.0 3", "10 13 0.7", "38 11 2", "24 10 1.2", "15 25 2", "30 35 1.5"} {
		s, err := extract.ParseCircle(text, true)
		add(fmt.Sprintf("circle %d", i), s, err)
	}
	for i, text := range []string{"23 22 4 1 30", "12 30 3 0.8 100", "33 20 1 2.5 0"} {
		s, err := extract.ParseEllipse(text, true)
		add(fmt.Sprintf("ellipse %d", i), s, err)
	}
	for i, text := range []string{"5 8 20 8 20 14 5 14", "20 20 30 20 25 33", "30 12 42 14 40 30 33 22"} {
		s, err := extract.ParsePolygon(text, true)
		add(fmt.Sprintf("polygon %d", i), s, err)
	}
	for i, text := range [][2]string{{"20", "25"}, {"18-25", "24"}, {"23", "15-30"}, {"2,7,12,17,22,27,32", "20-21"}} {
		s, err := extract.ParseVoxels(text[0], text[1])
		add(fmt.Sprintf("list %d", i), s, err)
	}
	s, err := extract.ParseCircle("8.8 34.5 1.6", true)
	a := add("circle with background", s, err)
	a.options.Background, err = extract.ParsePolygon("14 28 20 28 20 40 14 40", true)
	add("", a.options.Background, err)
	return all[:len(all)-1], failed
}

// Scene makes the field extended, without a star, or dominated by its stars.
func scene(f *trial.Field, stars bool) {
	kept := f.Scene.Sources[:0]
	for _, s := range f.Scene.Sources {
		switch {
		case s.Kind == rehearse.KindStar && stars:
			m := *s.ABMag - 1.5
			s.ABMag = &m
			kept = append(kept, s)
		case s.Kind != rehearse.KindStar && !stars:
			m := *s.ABMag - 1
			s.ABMag = &m
			kept = append(kept, s)
		}
	}
	f.Scene.Sources = kept
}

// Scatter is what the nights tell.
type Scatter struct {
	Nights    int
	apertures []*aperture
}

// tried is the field whose apertures are extracted.
func tried(stars bool) (*trial.Field, error) {
	field, err := trial.Square()
	if err != nil {
		return nil, err
	}
	field.Profile.Grid.FirstNM, field.Profile.Grid.Count = 478, 108
	scene(field, stars)
	return field, nil
}

// MeasureApertures rehearses and reduces so many nights, with the seeds first, first+1
// ..., one after the other in dir, and extracts the apertures of each.
func MeasureApertures(ctx context.Context, dir string, stars bool, nights int, first uint64) (*Scatter, error) {
	field, err := tried(stars)
	if err != nil {
		return nil, err
	}
	night, err := field.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	s := new(Scatter)
	if s.apertures, err = apertures(); err != nil {
		return nil, err
	}
	for k := range nights {
		name := fmt.Sprint(k)
		if err := night.Rehearse(ctx, name, rehearse.Options{Seed: first + uint64(k), NoTruth: true}); err != nil {
			return nil, err
		}
		if _, err := night.Reduce(ctx, name, reduce.Options{Cube: true}); err != nil {
			return nil, err
		}
		if err := s.add(ctx, night.Run(name)); err != nil {
			return nil, err
		}
		for _, gone := range []string{night.Frames(name), night.Run(name)} {
			if err := os.RemoveAll(filepath.Clean(gone)); err != nil {
				return nil, err
			}
		}
	}
	return s, nil
}

// band is the sum whose error is judged beside those of the channels.
var band = extract.Band{FromNM: 490, ToNM: 497, Sides: [][2]float64{{485, 489}, {499, 504}}}

func (s *Scatter) add(ctx context.Context, run string) error {
	c, err := extract.Open(run)
	if err != nil {
		return err
	}
	defer c.Close() // only read from
	s.Nights++
	for _, a := range s.apertures {
		o := a.options
		o.Bands = []extract.Band{band}
		spectrum, err := c.Spectrum(ctx, o)
		if err != nil {
			return fmt.Errorf("%s: %w", a.name, err)
		}
		a.add(spectrum, float64(s.Nights))
	}
	return nil
}

func (a *aperture) add(s *extract.Spectrum, n float64) {
	if a.mean == nil {
		l := len(s.Signal)
		a.mean, a.square, a.quoted, a.naive, a.bad = make([]float64, l), make([]float64, l), make([]float64, l), make([]float64, l), make([]bool, l)
	}
	for l, v := range s.Signal {
		if !(s.Coverage[l] > 0.99) || math.IsNaN(s.Error[l]) {
			a.bad[l] = true
			continue
		}
		m := moments{a.mean[l], a.square[l], a.quoted[l], a.naive[l]}
		m.add(v, s.Error[l], s.Naive[l], n)
		a.mean[l], a.square[l], a.quoted[l], a.naive[l] = m.mean, m.square, m.quoted, m.naive
	}
	b := s.Bands[0]
	a.band.add(b.Signal, b.Error, b.Naive, n)
}

func (m *moments) add(v, quoted, naive, n float64) {
	d := v - m.mean
	m.mean += d / n
	m.square += d * (v - m.mean)
	m.quoted += quoted * quoted
	m.naive += naive * naive
}

// ratios are scatter over quoted and over naive error, pooled over the channels.
func (a *aperture) ratios(nights int) (quoted, naive float64, channels int) {
	for l, bad := range a.bad {
		if bad {
			continue
		}
		channels++
		variance := a.square[l] / float64(nights-1)
		quoted += variance / (a.quoted[l] / float64(nights))
		naive += variance / (a.naive[l] / float64(nights))
	}
	return math.Sqrt(quoted / float64(channels)), math.Sqrt(naive / float64(channels)), channels
}

// Figures are how far scatter over quoted error may be from 1: in all apertures
// together, in the worst one, and in the band.
type Figures struct{ Pooled, Each, Band float64 }

// Required are those of 200 nights.
func Required() Figures { return Figures{Pooled: 0.03, Each: 0.15, Band: 0.08} }

// Findings judge the scatter over the quoted error, and state that over the naive
// one. Voxels of neighbouring channels share pixels, and some apertures overlap:
// every second channel and aperture counts as independent. scale multiplies the
// quoted errors, a test of the test.
func (s *Scatter) Findings(name string, figures Figures, scale float64) []trial.Finding {
	var pooled, pooledNaive, bandQuoted, bandNaive float64
	worst, worstName := 1.0, ""
	least, most := math.Inf(1), 0.0
	channels := 0
	f := float64(s.Nights - 1)
	for _, a := range s.apertures {
		q, naive, n := a.ratios(s.Nights)
		q /= scale
		pooled += q * q
		pooledNaive += naive * naive
		channels = n
		if math.Abs(math.Log(q)) >= math.Abs(math.Log(worst)) {
			worst, worstName = q, a.name
		}
		least, most = min(least, naive), max(most, naive)
		variance := a.band.square / f
		bandQuoted += variance / (a.band.quoted / float64(s.Nights)) / scale / scale
		bandNaive += variance / (a.band.naive / float64(s.Nights))
	}
	k := float64(len(s.apertures))
	// A variance of n samples has a relative error of sqrt(2/n), its root half.
	each, all, bands := float64(channels/2)*f, float64(channels/2)*f*k/2, f*k/2
	name = fmt.Sprintf("%s, %d seeds, %d apertures, %d wavelengths", name, s.Nights, len(s.apertures), channels)
	return []trial.Finding{
		trial.Near(name+": scatter over quoted error", math.Sqrt(pooled/k), 1, figures.Pooled, 1/math.Sqrt(2*all), int(all)),
		trial.Near(name+": the same in the worst aperture, "+worstName, worst, 1, figures.Each, 1/math.Sqrt(2*each), int(each)),
		trial.Near(name+": scatter over quoted error of a band less its continuum", math.Sqrt(bandQuoted/k), 1, figures.Band, 1/math.Sqrt(2*bands), int(bands)),
		trial.Stated(name+": scatter over naive error", math.Sqrt(pooledNaive/k), int(all)),
		trial.Stated(name+": the same, least of an aperture", least, int(each)),
		trial.Stated(name+": the same, largest of an aperture", most, int(each)),
		trial.Stated(name+": scatter over naive error of the band", math.Sqrt(bandNaive/k), int(bands)),
	}
}

// List gives the ratios of each aperture in words.
func (s *Scatter) List() []string {
	var lines []string
	for _, a := range s.apertures {
		q, naive, n := a.ratios(s.Nights)
		lines = append(lines, fmt.Sprintf("%-24s %3d channels: scatter over quoted error %.3f, over naive %.3f", a.name, n, q, naive))
	}
	return lines
}
