package plan

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/sequence"
)

// warnings says what the plan can do less well than the observer may think.
func warnings(s *sequence.Sequence, o *optics) []string {
	w := []string{}
	add := func(ok bool, format string, args ...any) {
		if !ok {
			w = append(w, fmt.Sprintf(format, args...))
		}
	}
	n, g := s.N(), len(s.DarkColumns())
	least := 2 * math.Log2(float64(s.V))
	add(float64(g) >= least, "%d dark columns are fewer than 2 log2 v = %s: the order audit, the throughput correction and repairs are off", g, number(least))
	for _, j := range edges(n) {
		seen := o.bandSeen(j, n)
		add(seen == 1, "element %d of %d has %.1f %% of the wavelength grid on the detector", j, n, 100*seen)
	}
	w = append(w, shortStrips(s, o)...)
	t, c := s.Target, s.Target.Calibration
	add(t.AllOffEvery > 0, "no all-off frame is planned: light through closed mirrors can only be judged from the dark columns")
	add(c.Bias.Count > 0, "no bias frame is planned")
	add(c.Dark.Count > 0, "no dark frame is planned")
	add(c.Flat.Count > 0 || c.Flat.CodedCycles > 0, "no flat is planned")
	add(c.Flat.Count == 0 || c.Flat.CodedCycles > 0, "no coded flat cycle is planned: slit function and efficiency will not be corrected")
	add(c.Arc.Count > 0, "no arc is planned: wavelengths will be nominal")
	return append(w, stuckWarnings(s)...)
}

func edges(n int) []int {
	if n == 1 {
		return []int{0}
	}
	return []int{0, n - 1}
}

// shortStrips warns of edge elements whose mirrors do not reach all the rows
// that the middle of the device lights.
func shortStrips(s *sequence.Sequence, o *optics) []string {
	var w []string
	columns := s.ElementColumns()
	for _, j := range edges(len(columns)) {
		e := s.Elements[columns[j]]
		u := e.First
		if j > 0 {
			u = e.Last
		}
		// Rows are whole: a fraction of one is no loss.
		if reached, seen := o.stripRows(u); reached < seen-1 {
			w = append(w, fmt.Sprintf("element %d has mirrors for %.0f of the %.0f detector rows: the device's corner cuts its strip", j, reached+1, seen+1))
		}
	}
	return w
}
