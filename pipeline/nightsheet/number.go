package nightsheet

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"
)

// number prints three digits, more of numbers above a thousand, without an exponent where it
// can be helped.
func number(x float64) string {
	size := math.Abs(x)
	switch {
	case size == 0:
		return "0"
	case size >= 1e9 || size < 1e-3:
		return strconv.FormatFloat(x, 'g', 3, 64)
	case size >= 1000:
		return strconv.FormatFloat(x, 'f', 0, 64)
	}
	text := strconv.FormatFloat(x, 'f', max(0, 2-int(math.Floor(math.Log10(size)))), 64)
	if strings.Contains(text, ".") {
		text = strings.TrimRight(strings.TrimRight(text, "0"), ".")
	}
	return text
}

// snr prints an S/N.
func snr(x float64) string {
	if x >= 100 {
		return fmt.Sprintf("%.0f", x)
	}
	return fmt.Sprintf("%.1f", x)
}

// duration prints minutes as hours and minutes, or as seconds.
func duration(minutes float64) string {
	switch {
	case minutes < 1:
		return number(60*minutes) + " s"
	case minutes < 59.95:
		return fmt.Sprintf("%.1f min", minutes)
	}
	whole := int(math.Round(minutes))
	return fmt.Sprintf("%d h %02d min", whole/60, whole%60)
}

// clock is the time of day of a UTC, with the day's number where it is not the night's first.
func clock(utc, first string) string {
	at, err := time.Parse(time.RFC3339, utc)
	if err != nil {
		return utc
	}
	text := at.Format("15:04:05")
	if start, err := time.Parse(time.RFC3339, first); err == nil {
		if days := int(at.Truncate(24*time.Hour).Sub(start.Truncate(24*time.Hour)).Hours()) / 24; days > 0 {
			text += fmt.Sprintf(" +%dd", days)
		}
	}
	return text
}

// plural is a count with its word.
func plural(n int, word string) string {
	if n == 1 {
		return "1 " + word
	}
	return fmt.Sprintf("%d %ss", n, word)
}
