package instrument

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/config"
)

const (
	// maxAmplifiers bounds the checks of pairs; large mosaics have 36 to 64.
	maxAmplifiers = 64
	// maxRawSide leaves room for overscan on the largest detector.
	maxRawSide = 2 * maxSide
	// maxLinearity: a correction of higher degree only follows noise.
	maxLinearity = 8
	// maxADU is the largest value of a 16-bit frame; a saturation level there
	// could not be told from clipped values.
	maxADU = 65535
	// maxReads of an exposure, far beyond what arrays are read.
	maxReads = 10000
)

func (p *Profile) checkDetector(c *config.Checks) {
	d := &p.Detector
	c.Count("detector.columns", d.Columns, 1, maxSide)
	c.Count("detector.rows", d.Rows, 1, maxSide)
	c.That(len(d.Amplifiers) >= 1 && len(d.Amplifiers) <= maxAmplifiers, "detector.amplifiers", "there are %d amplifiers; give 1 to %d", len(d.Amplifiers), maxAmplifiers)
	if c.Err() != nil {
		return // the checks of pairs need the bound
	}
	for i, a := range d.Amplifiers {
		a.check(c, amplifierPath(i))
	}
	d.checkOverlaps(c)
	d.checkTiling(c)
	c.NotNegative("detector.dark_e_per_s", d.DarkEPerS)
	c.That(d.SaturationADU > 0 && d.SaturationADU < maxADU, "detector.saturation_adu", "%v is not between 0 and %d; give the lowest raw value that is not to be trusted", d.SaturationADU, maxADU)
	for i, a := range d.Amplifiers {
		c.That(a.BiasADU < d.SaturationADU, amplifierPath(i)+".bias_adu", "%v lies not below saturation_adu, %v; correct one of them", a.BiasADU, d.SaturationADU)
	}
	d.checkLinearity(c)
	d.Mode().check(c)
	c.NotNegative("detector.read_s", d.ReadS)
}

// check demands numbers that the mode has, so that a forgotten kind shows.
func (m ReadMode) check(c *config.Checks) {
	const path = "detector.read_mode"
	c.OneOf(path+".kind", m.Kind, SingleRead, DoubleRead, FowlerRead, RampRead)
	switch m.Kind {
	case FowlerRead:
		c.Count(path+".reads", m.Reads, 1, maxReads)
		c.That(m.Spacing >= 0 && m.Spacing*float64(m.Reads) <= 1, path+".spacing", "%v times %d reads is not between 0 and 1; give a spacing with which the first group ends before the second begins", m.Spacing, m.Reads)
	case RampRead:
		c.Count(path+".reads", m.Reads, 2, maxReads)
		c.That(m.Spacing == 0, path+".spacing", "%v has no effect on a ramp, whose reads fill the exposure; leave it out", m.Spacing)
	default:
		c.That(m.Reads == 0 && m.Spacing == 0, path, "reads and spacing have no effect on %s; leave them out, or give kind fowler or ramp", m.Kind)
	}
}

func amplifierPath(i int) string { return fmt.Sprintf("detector.amplifiers[%d]", i) }

func (a *Amplifier) check(c *config.Checks, path string) {
	a.Data.check(c, path+".data")
	if len(a.Overscan) > 0 {
		s, ok := a.Overscan.Section()
		c.That(ok, path+".overscan", "the section has %d numbers; give x1, x2, y1, y2, or none without overscan", len(a.Overscan))
		s.check(c, path+".overscan")
		// The bias level is taken row by row from the overscan.
		c.That(s[2] == a.Data[2] && s[3] == a.Data[3], path+".overscan", "the rows %d to %d are not those of the data, %d to %d; give the overscan beside the data", s[2], s[3], a.Data[2], a.Data[3])
	}
	c.Positive(path+".gain_e_per_adu", a.GainEPerADU)
	c.Positive(path+".read_noise_e", a.ReadNoiseE)
	c.NotNegative(path+".bias_adu", a.BiasADU)
}

func (s Section) check(c *config.Checks, path string) {
	good := 1 <= s[0] && s[0] <= s[1] && s[1] <= maxRawSide && 1 <= s[2] && s[2] <= s[3] && s[3] <= maxRawSide
	c.That(good, path, "%v is no section x1, x2, y1, y2 of pixels from 1 to %d; give each first not above its last", [4]int(s), maxRawSide)
}

// checkOverlaps demands that no raw pixel belongs to two sections.
func (d *Detector) checkOverlaps(c *config.Checks) {
	type named struct {
		path string
		Section
	}
	var all []named
	for i, a := range d.Amplifiers {
		all = append(all, named{amplifierPath(i) + ".data", a.Data})
		if s, ok := a.Overscan.Section(); ok {
			all = append(all, named{amplifierPath(i) + ".overscan", s})
		}
	}
	for i, later := range all {
		for _, earlier := range all[:i] {
			c.That(!later.overlaps(earlier.Section), later.path, "the section shares pixels with %s; give each raw pixel to one section", earlier.path)
		}
	}
}

// checkTiling demands that the data sections, gaps closed, tile the active
// pixels: each lies within them, none overlap (two raw sections apart stay
// apart when gaps close that no section covers), and the areas add up.
func (d *Detector) checkTiling(c *config.Checks) {
	if c.Err() != nil {
		return // sections that are none have no place
	}
	area := 0
	for i, place := range d.Active() {
		right, top := place.X0+place.Raw.Width(), place.Y0+place.Raw.Height()
		c.That(right <= d.Columns && top <= d.Rows, amplifierPath(i)+".data", "the section reaches active column %d and row %d of a detector of %d x %d; correct the section or the detector's size", right, top, d.Columns, d.Rows)
		area += place.Raw.Width() * place.Raw.Height()
	}
	c.That(area == d.Columns*d.Rows, "detector.amplifiers", "the data sections cover %d pixels of the %d x %d of the detector; give sections that tile it", area, d.Columns, d.Rows)
}

// checkLinearity demands a correction that rises all the way to saturation:
// else two true levels would give one measured.
func (d *Detector) checkLinearity(c *config.Checks) {
	const path = "detector.linearity"
	c.That(len(d.Linearity) <= maxLinearity, path, "there are %d coefficients; give at most %d", len(d.Linearity), maxLinearity)
	for i, coefficient := range d.Linearity {
		c.Finite(fmt.Sprintf("%s[%d]", path, i), coefficient)
	}
	const samples = 256 // the degree is 9 at most: turns are wider than this
	for i := range samples + 1 {
		m := d.SaturationADU * float64(i) / samples
		slope := 1.0
		power := m
		for k, coefficient := range d.Linearity {
			slope += float64(k+2) * coefficient * power
			power *= m
		}
		c.That(slope > 0 && !math.IsInf(slope, 0), path, "the corrected level does not rise at %.0f ADU above bias; give coefficients that hold up to saturation", m)
	}
}
