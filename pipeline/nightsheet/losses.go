package nightsheet

import (
	"fmt"
	"math"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/sequence"
)

// Losses says what lost science frames cost.
type Losses struct {
	// PerCycle is how many of each cycle may be lost with hardly any more noise.
	PerCycle int `json:"per_cycle"`
	// Verdict is one sentence.
	Verdict string `json:"verdict"`
}

// lossesOf goes by the number g of dark columns: a quarter of it in lost frames is restored with
// 1.14 times the noise; below 2 log2 v of them nothing is restored.
func lossesOf(s *sequence.Sequence) Losses {
	g := s.V - s.N()
	switch {
	case s.Family == string(hadamard.SlitScan):
		return Losses{0, "a lost frame of a slit scan loses its element: repeat it"}
	case float64(g) < 2*math.Log2(float64(s.V)) && s.Target.Code.Cycles > 1:
		return Losses{0, fmt.Sprintf("with %d dark columns nothing is restored: a code row must be kept in at least one cycle, so repeat a step that is lost in all", g)}
	case float64(g) < 2*math.Log2(float64(s.V)):
		return Losses{0, fmt.Sprintf("none: with %d dark columns nothing is restored, so repeat each lost step", g)}
	}
	return Losses{g / 4, fmt.Sprintf("%d of each cycle's %d code rows (a quarter of the %d dark columns) with 1.14 times the noise; repeat what goes beyond", g/4, s.V, g)}
}
