package audit

import "math"

// lightSigmas is by how many standard deviations the light between two frames may be
// more than the sample shows.
const lightSigmas = 3

// sure tells whether every exchange of two frames is excluded by the odds, or harmless;
// and how many pixels the sample should have to exclude those that are not. Where even
// the largest sample would not do, with as much light as there may be, more pixels are
// not wanted: rows whose marks on the dark columns are alike cannot be told apart.
func (s *state) sure() (sure bool, wanted int) {
	sure, wanted = true, s.pixels
	limit := (sureLogOdds + 2*math.Log(float64(s.v))) * s.scatter()
	most := float64(s.MostPixels) / float64(s.pixels)
	for k := range s.v {
		if s.erased[k] {
			continue
		}
		for i := k + 1; i < s.v; i++ {
			if s.erased[i] || s.tame(k, i) {
				continue
			}
			p, light := s.apart(k, i)
			odds := s.exchanged(p, light).expected()
			if odds >= limit {
				continue
			}
			sure = false
			highest := light + lightSigmas*math.Sqrt(8*(float64(s.pixels)+max(light, 0)))
			// Odds grow with the sample.
			if s.exchanged(p, highest).expected()*most < limit {
				continue
			}
			times := most
			if odds > 0 {
				times = min(limit/odds, most)
			}
			wanted = max(wanted, int(math.Ceil(times*float64(s.pixels))))
		}
	}
	return sure, max(wanted, s.wantedAlone(limit, most))
}

// tellSigma is the rms change of voxels from which a mask that is wrong by itself is to be
// told from its own.
const tellSigma = 0.05

// alikeNoise is how many times the noise that is counted between two masks of a frame,
// that of all its pixels, may exceed what they have where they are nearly alike: what
// they share checks neither.
const alikeNoise = 4

// wantedAlone is the size that the sample should have to tell flipped and inverted masks
// from those of each row in use, where that changes voxels by tellSigma: of the light D
// between the two, P_kk D is seen.
func (s *state) wantedAlone(limit, most float64) int {
	wanted := s.pixels
	for k := range s.v {
		if s.erased[k] {
			continue
		}
		own := s.prediction(s.bits(k))
		for _, kind := range []Kind{Flipped, Inverted} {
			light := s.lightBetween(s.prediction(s.weightsOf(move{kind: kind, row: k})), own)
			if light <= tellSigma*tellSigma*float64(s.pixels)*float64(s.v) {
				continue
			}
			odds := separation{s.projector.At(k, k) * light, float64(s.pixels)}.expected()
			if odds >= limit || odds*most*alikeNoise < limit {
				continue
			}
			wanted = max(wanted, int(math.Ceil(min(limit/odds, most)*float64(s.pixels))))
		}
	}
	return wanted
}

// lightBetween is the light between two predictions, noise taken off.
func (s *state) lightBetween(a, b []float64) float64 {
	x := make([]float64, s.v)
	for i := range x {
		x[i] = a[i] - b[i]
	}
	clean := make([]float64, s.v)
	for i := range clean {
		if s.from[i] != none && !s.erased[i] {
			clean[i] = x[i] - dot(s.projector.RawRowView(i), x)
		}
	}
	light := 0.0
	for i, y := range clean {
		if y != 0 {
			light += y*dot(s.sum.RawRowView(i), clean) - y*y*s.noise[i]
		}
	}
	return light
}

// tame tells whether the exchange of two rows' frames is harmless: the rms change of
// voxels by it is sqrt(2 d^2/(s^2 v)).
func (s *state) tame(k, i int) bool {
	between := s.sum.At(k, k) + s.sum.At(i, i) - 2*s.sum.At(k, i) - s.noise[k] - s.noise[i]
	return 2*between/(float64(s.pixels)*float64(s.v)) <= HarmlessSigma*HarmlessSigma
}
