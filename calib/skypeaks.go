package calib

import "math"

// SkyPeaks finds places that stand out in a band of a few voxels, however faint they are in
// white light: nebulae and galaxies that show in lines. In each band a place is a source
// where the mean over a square lies PeakSigmas above the level, for any of PeakSides;
// level and scale are those of SkyRule, of the places that no band before has taken.
type SkyPeaks struct {
	rule  SkyRule
	p     *skyPicture
	rows  int
	found []bool
}

// mostMeasured places are looked at for level and scale in a band: their errors are then
// below a hundredth of a place's noise.
const mostMeasured = 20000

// NewPeaks is for pictures of so many places in rows of elements.
func (r SkyRule) NewPeaks(places, elements int) *SkyPeaks {
	return &SkyPeaks{rule: r, found: make([]bool, places), rows: places / elements,
		p: &skyPicture{rows: places / elements, elements: elements, sigmas: make([]float64, places), usable: make([]bool, places)}}
}

// Add looks at the picture of a band, as Choose does.
func (s *SkyPeaks) Add(picture, variance []float64) {
	s.p.values, s.p.source = picture, s.found
	s.p.load(variance)
	s.p.stride = max(1, len(picture)/mostMeasured)
	if !s.p.measure() {
		return
	}
	for _, side := range s.rule.PeakSides {
		s.p.mark(side, s.rule.PeakSigmas)
	}
}

// Found are the places taken, each with PeakMargin rings around it: what squares find
// goes on beyond them.
func (s *SkyPeaks) Found() []bool {
	s.p.source = s.found
	for i := range s.p.usable {
		s.p.usable[i] = true
	}
	for range s.rule.PeakMargin {
		s.p.widen()
	}
	return s.found
}

// load takes the variances of a picture: what is usable, and how many places are.
func (p *skyPicture) load(variance []float64) {
	p.places = 0
	for i, v := range variance {
		p.usable[i] = v > 0 && !math.IsInf(v, 1) && !math.IsNaN(p.values[i]) && !math.IsInf(p.values[i], 0)
		if p.usable[i] {
			p.sigmas[i] = math.Sqrt(v)
			p.places++
		}
	}
}
