package plan

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Parts of an element's light that a voxel may lack before it is worth a word, and before
// it is flagged.
const (
	someLight = 0.01
	mostLight = 0.5
)

// stuckWarnings say what becomes of the mirrors that do not move; none where all do.
func stuckWarnings(s *sequence.Sequence) []string {
	placed := s.StuckMirrors()
	if len(placed) == 0 {
		return nil
	}
	coded, on, harmless := 0, 0, 0
	for _, m := range placed {
		switch {
		case m.Coded():
			coded++
		case !m.On:
			harmless++
		}
		if m.On {
			on++
		}
	}
	text := fmt.Sprintf("mirrors that do not move: %d, in the coded field %d", len(placed), coded)
	if coded > 0 {
		some, most := stuckLosses(s, placed)
		text += fmt.Sprintf(", by which %d of %d pairs of an element and a detector row lack more than 1 %% of their light, which reduce puts in from what is around", some, litPairs(s))
		if most > 0 {
			text += fmt.Sprintf(", and %d more than half, whose voxels will be flagged LOWFLAT", most)
		}
	}
	if harmless > 0 {
		text += fmt.Sprintf("; off where no step opens them: %d", harmless)
	}
	list := []string{text}
	if on > 0 && s.Target.AllOffEvery == 0 {
		list = append(list, fmt.Sprintf("mirrors stuck on: %d, and no all-off frame is planned, which would show their light: give all_off_every", on))
	}
	return list
}

// stuckLosses counts the pairs of an element and a detector row, at x_c, that lack more
// than someLight and mostLight of their light, if it is even. A mirror's image is taken
// for a Gaussian of lsf_fwhm_px.
func stuckLosses(s *sequence.Sequence, placed []sequence.PlacedMirror) (some, most int) {
	p := s.Profile
	step := math.Abs(p.Spectrograph.WStepPx)
	const perSigma = 2.354820045030949 // 2 sqrt(2 ln 2)
	scale := perSigma / (p.Spectrograph.LSFFWHMPx * math.Sqrt2)
	mirrors := float64(s.ElementMirrors()) / step // in a row of pixels
	if p.DMD.Mounting == instrument.Diagonal {
		mirrors /= 2
	}
	lacks := map[[2]int]float64{}
	for _, m := range placed {
		if !m.Coded() {
			continue
		}
		row := p.Spectrograph.YCenterPx + p.Spectrograph.WStepPx*(float64(m.W)-p.WCenter())
		reach := 2 * p.Spectrograph.LSFFWHMPx
		for y := max(0, int(math.Ceil(row-reach))); y <= min(p.Detector.Rows-1, int(row+reach)); y++ {
			d := float64(y) - row
			lacks[[2]int{m.Element, y}] += (math.Erf((d+0.5)*scale) - math.Erf((d-0.5)*scale)) / 2 / mirrors
		}
	}
	for _, part := range lacks {
		if part > someLight {
			some++
		}
		if part > mostLight {
			most++
		}
	}
	return some, most
}

// litPairs counts the pairs of an element and a detector row that coded mirror rows light.
func litPairs(s *sequence.Sequence) int {
	rows := 0
	for _, r := range s.Rows {
		if r.Use == sequence.UseCoded {
			rows += r.Last - r.First + 1
		}
	}
	lit := float64(rows) * math.Abs(s.Profile.Spectrograph.WStepPx)
	return s.N() * int(math.Round(min(lit, float64(s.Profile.Detector.Rows))))
}
