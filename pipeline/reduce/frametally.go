package reduce

import "mirrorloom/pipeline/exposure"

// frameTally lists the frames of slots, slot by slot, so that figures of each can be kept
// in a slice.
type frameTally struct {
	frames []*exposure.Frame
	first  []int // by slot, the place of its first frame
}

func newTally(slots [][]*exposure.Frame) frameTally {
	var t frameTally
	for _, frames := range slots {
		t.first = append(t.first, len(t.frames))
		t.frames = append(t.frames, frames...)
	}
	return t
}

// at is the place of frame n of a slot.
func (t *frameTally) at(slot, n int) int { return t.first[slot] + n }

// addSaturated counts the saturated pixels of a strip.
func (t *frameTally) addSaturated(s *strip) {
	for i, n := range s.saturated {
		t.frames[i].Saturated += n
	}
}

// saturated are the counts so far.
func (t *frameTally) saturated() []int {
	all := make([]int, len(t.frames))
	for i, f := range t.frames {
		all[i] = f.Saturated
	}
	return all
}
