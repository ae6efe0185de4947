package reduce

import "mirrorloom/pipeline/exposure"

// slotScale says how the frames of each slot, that is of a code row, make its sample:
// their mean after each was multiplied by its factor. Entries are by slot, and 0 for a
// slot without frames.
type slotScale struct {
	// gain is the mean of the frames' factors, and shift that of factor times offset,
	// electrons: what bias, dark and offset became in the sample.
	gain, shift []float64
	// light and quiet are the sample's variance for one electron of corrected light,
	// and for a variance of one electron without light in each frame: with n frames of
	// factors f, mean(f)/n and mean(f^2)/n, since light before its factor is 1/f of
	// that after it.
	light, quiet []float64
	// lightSum and quietSum are their sums.
	lightSum, quietSum float64
	// uncertain times the square of the light is what the factors' own variances add.
	uncertain []float64
	// lost are the slots without frames.
	lost []int
}

func newSlotScale(slots [][]*exposure.Frame, c *correction) slotScale {
	s := slotScale{
		gain: make([]float64, len(slots)), shift: make([]float64, len(slots)),
		light: make([]float64, len(slots)), quiet: make([]float64, len(slots)), uncertain: make([]float64, len(slots)),
	}
	for i, frames := range slots {
		n := float64(len(frames))
		if n == 0 {
			s.lost = append(s.lost, i)
			continue
		}
		for _, f := range frames {
			factor, offset, variance := c.of(f.Step)
			s.gain[i] += factor / n
			s.shift[i] += factor * offset / n
			s.quiet[i] += factor * factor / (n * n)
			s.uncertain[i] += variance / (factor * factor) / (n * n)
		}
		s.light[i] = s.gain[i] / n
		s.lightSum += s.light[i]
		s.quietSum += s.quiet[i]
	}
	return s
}

// isLost tells a slot without frames.
func (s *slotScale) isLost(slot int) bool { return s.quiet[slot] == 0 }

// meanLight is the mean of light over the slots with frames.
func (s *slotScale) meanLight() float64 {
	return s.lightSum / float64(max(1, len(s.quiet)-len(s.lost)))
}

// meanQuiet is the mean of quiet over the slots with frames.
func (s *slotScale) meanQuiet() float64 {
	return s.quietSum / float64(max(1, len(s.quiet)-len(s.lost)))
}
