package plan

import (
	"fmt"
	"math"
	"strings"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/sequence"
)

// ShortNight says what is lost of an order of the science steps if the night ends early.
type ShortNight struct {
	// Order is the order within a cycle, Cycles their number; Planned marks the plan's own.
	Order   string `json:"order"`
	Cycles  int    `json:"cycles"`
	Planned bool   `json:"planned,omitempty"`
	// DriftError is the rms error of an element of an even field, in parts of its light, that
	// a throughput leaves which drifts by 1 % from the first to the last step, uncorrected.
	DriftError float64 `json:"drift_error"`
	// Tails are for the last 10, 25 and 50 % of the steps not taken.
	Tails []Tail `json:"tails"`
}

// Tail is what is left where the last steps are never taken.
type Tail struct {
	Fraction float64 `json:"fraction"`
	// Steps are not taken, Rows are code rows of which no frame is left.
	Steps int `json:"steps"`
	Rows  int `json:"rows"`
	// Elements is the part of elements that come out, all or none of a coded field.
	Elements float64 `json:"elements"`
	// Noise is by how much the noise of these grows over that of the whole night, where it
	// does not depend on the light; 0 where none come out.
	Noise float64 `json:"noise"`
}

// tailFractions are the parts of the night that are missed.
var tailFractions = [...]float64{0.10, 0.25, 0.50}

// mostCompared is the largest code of which orders other than the plan's are worked out:
// beyond it takes seconds.
const mostCompared = 300

// shortNights compares the orders, the plan's first, then the same in more cycles of shorter
// steps.
func shortNights(s *sequence.Sequence, code *hadamard.Code, dark []int, planned [][]int) ([]ShortNight, error) {
	var checks *hadamard.Checks
	if len(dark) > 0 {
		var err error
		if checks, err = hadamard.NewChecks(code, dark); err != nil {
			return nil, err
		}
	}
	own := s.Target.Code
	var list []ShortNight
	add := func(order string, cycles int, orders [][]int) error {
		n := ShortNight{Order: order, Cycles: cycles, Planned: order == own.Order && cycles == own.Cycles}
		if code.Family() != hadamard.SlitScan {
			n.DriftError = 0.01 * driftOver(code, dark, orders)
		}
		for _, f := range tailFractions {
			t, err := tailOf(code, checks, orders, f)
			if err != nil {
				return err
			}
			n.Tails = append(n.Tails, t)
		}
		list = append(list, n)
		return nil
	}
	if err := add(own.Order, own.Cycles, planned); err != nil || s.V > mostCompared {
		return list, err
	}
	for _, order := range []string{sequence.OrderShuffled, sequence.OrderNested, sequence.OrderDrift} {
		if order == own.Order {
			continue
		}
		orders, err := scienceOrders(order, code, dark, own.Cycles, s.OrderSeed)
		if err != nil {
			return nil, err
		}
		if err := add(order, own.Cycles, orders); err != nil {
			return nil, err
		}
	}
	for _, cycles := range []int{2 * own.Cycles, 4 * own.Cycles} {
		orders, err := scienceOrders(own.Order, code, dark, cycles, s.OrderSeed)
		if err != nil {
			return nil, err
		}
		if err := add(own.Order, cycles, orders); err != nil {
			return nil, err
		}
	}
	return list, nil
}

// driftOver is driftError of several cycles through which the drift runs: of the mean of a
// row's frames.
func driftOver(code *hadamard.Code, dark []int, orders [][]int) float64 {
	v := code.V()
	mean := make([]float64, v) // the drift at the rows' frames
	for i, order := range orders {
		for at, k := range order {
			mean[k] += rampAt(i*v+at, v*len(orders)) / float64(len(orders))
		}
	}
	return markError(code, dark, mean)
}

// tailOf looks at the last fraction of the steps as not taken.
func tailOf(code *hadamard.Code, checks *hadamard.Checks, orders [][]int, fraction float64) (Tail, error) {
	v, cycles := code.V(), len(orders)
	t := Tail{Fraction: fraction, Steps: int(math.Round(fraction * float64(v*cycles)))}
	frames := make([]int, v)
	for at := range v*cycles - t.Steps {
		frames[orders[at/v][at%v]]++
	}
	var lost []int
	shorter := 0.0 // mean of the whole night's frames of a row over those left
	for k, n := range frames {
		if n == 0 {
			lost = append(lost, k)
			continue
		}
		shorter += float64(cycles) / float64(n)
	}
	t.Rows = len(lost)
	shorter /= float64(max(v-len(lost), 1))
	if code.Family() == hadamard.SlitScan {
		t.Elements = float64(v-len(lost)) / float64(v)
		t.Noise = math.Sqrt(shorter)
		return t, nil
	}
	growth := 1.0
	if len(lost) > 0 {
		if checks == nil || len(lost) > checks.G() {
			return t, nil
		}
		rank, variance, err := checks.Erasure(lost)
		if err != nil {
			return t, fmt.Errorf("what a short night loses: %w", err)
		}
		if rank < len(lost) || math.Sqrt(variance) > mostGrowth {
			return t, nil
		}
		growth = math.Sqrt(variance)
	}
	t.Elements, t.Noise = 1, growth*math.Sqrt(shorter)
	return t, nil
}

// mostGrowth of the noise is where reduce gives restored rows up.
const mostGrowth = 5

// shortNightText is the table, lines ended; empty for none.
func (r *Summary) shortNightText() string {
	if len(r.ShortNights) == 0 {
		return ""
	}
	var b strings.Builder
	b.WriteString("if the last steps are never taken, noise over that of the whole night:\n")
	fmt.Fprintf(&b, "%-18s %12s %12s %12s   %s\n", "order, cycles", "10 %", "25 %", "50 %", "error of a drift of 1 %")
	for _, n := range r.ShortNights {
		fmt.Fprintf(&b, "%-18s", fmt.Sprintf("%s, %d", n.Order, n.Cycles))
		for _, t := range n.Tails {
			text := "all lost"
			switch {
			case t.Elements == 1:
				text = fmt.Sprintf("%.2f", t.Noise)
			case t.Elements > 0:
				text = fmt.Sprintf("%.0f %% seen", 100*t.Elements)
			}
			fmt.Fprintf(&b, " %12s", text)
		}
		fmt.Fprintf(&b, "   %.2g %%", 100*n.DriftError)
		if n.Planned {
			b.WriteString("  planned")
		}
		b.WriteString("\n")
	}
	b.WriteString("\n")
	return b.String()
}
