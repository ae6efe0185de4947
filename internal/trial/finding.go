package trial

import (
	"fmt"
	"math"
)

// Finding is a figure that is required, and what was measured.
type Finding struct {
	What     string
	Required string
	Measured string
	// N is the number of independent samples behind the measurement.
	N  int
	OK bool
}

// String is the finding on one line.
func (f Finding) String() string {
	verdict := "holds"
	if !f.OK {
		verdict = "FAILS"
	}
	return fmt.Sprintf("%s: %s, required %s, N = %d: %s", f.What, f.Measured, f.Required, f.N, verdict)
}

// AllHold tells whether every finding does.
func AllHold(list []Finding) bool {
	for _, f := range list {
		if !f.OK {
			return false
		}
	}
	return len(list) > 0
}

// standardErrors is how many a measurement may be off: chance exceeds it once in
// two million.
const standardErrors = 5

// Near demands |measured - want| within tolerance or 5 standard errors,
// whichever is larger. A measurement that is no number fails.
func Near(what string, measured, want, tolerance, standardError float64, n int) Finding {
	allowed := max(tolerance, standardErrors*standardError)
	required := fmt.Sprintf("%.4g +- %.3g", want, tolerance)
	if allowed > tolerance {
		required = fmt.Sprintf("%.4g +- %.3g (5 standard errors)", want, allowed)
	}
	return Finding{
		What: what, Required: required, Measured: fmt.Sprintf("%.5g", measured), N: n,
		OK: n > 0 && math.Abs(measured-want) <= allowed,
	}
}

// Below demands a measurement below a limit.
func Below(what string, measured, limit float64, n int) Finding {
	return Finding{
		What: what, Required: fmt.Sprintf("< %.3g", limit), Measured: fmt.Sprintf("%.3g", measured), N: n,
		OK: n > 0 && measured < limit,
	}
}

// AtLeast demands a measurement of a limit or more.
func AtLeast(what string, measured, limit float64, n int) Finding {
	return Finding{
		What: what, Required: fmt.Sprintf(">= %.4g", limit), Measured: fmt.Sprintf("%.5g", measured), N: n,
		OK: n > 0 && measured >= limit,
	}
}

// MustFail demands that a check's findings do not all hold: a test of the test.
func MustFail(what string, list []Finding) Finding {
	failed := 0
	for _, f := range list {
		if !f.OK {
			failed++
		}
	}
	return Finding{
		What: what, Required: "fails", Measured: fmt.Sprintf("%d of %d figures fail", failed, len(list)), N: len(list),
		OK: failed > 0,
	}
}

// Stated is a measurement of which no figure is required.
func Stated(what string, measured float64, n int) Finding {
	return Finding{What: what, Required: "stated", Measured: fmt.Sprintf("%.5g", measured), N: n, OK: n > 0}
}
