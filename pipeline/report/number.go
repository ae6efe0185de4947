package report

import (
	"fmt"
	"math"
	"strconv"
)

// percent prints a fraction with two decimals, and never as all or nothing what
// is not.
func percent(x float64) string {
	switch {
	case math.IsNaN(x):
		return "–"
	case x > 0 && x < 0.00005:
		return "< 0.01 %"
	case x < 1 && x > 0.99995:
		return "> 99.99 %"
	case x == 0 || x == 1:
		return fmt.Sprintf("%.0f %%", 100*x)
	}
	return fmt.Sprintf("%.2f %%", 100*x)
}

// figure prints a number with four significant digits, with an exponent only
// where it would be long.
func figure(x float64) string {
	switch size := math.Abs(x); {
	case math.IsNaN(x):
		return "–"
	case size == 0:
		return "0"
	case size >= 1e6 || size < 1e-3:
		return strconv.FormatFloat(x, 'e', 2, 64)
	case size >= 1000:
		return strconv.FormatFloat(x, 'f', 0, 64)
	}
	decimals := 3 - int(math.Floor(math.Log10(math.Abs(x))))
	text := strconv.FormatFloat(x, 'f', min(decimals, 4), 64)
	short, _ := strconv.ParseFloat(text, 64) // a number by construction
	return strconv.FormatFloat(short, 'f', -1, 64)
}

// bytesText prints a number of bytes with a unit of 1000.
func bytesText(n int64) string {
	units := []string{"B", "kB", "MB", "GB", "TB", "PB", "EB"}
	x, i := float64(n), 0
	for x >= 999.5 && i+1 < len(units) {
		x, i = x/1000, i+1
	}
	if i == 0 {
		return fmt.Sprintf("%d B", n)
	}
	return strconv.FormatFloat(x, 'f', 2-int(math.Log10(max(x, 1))), 64) + " " + units[i]
}
