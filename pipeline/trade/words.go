package trade

import (
	"fmt"
	"strconv"
)

// seconds is a time in words.
func seconds(s float64) string {
	switch {
	case s >= 3600:
		return fmt.Sprintf("%.0f s (%.1f h)", s, s/3600)
	case s >= 100:
		return fmt.Sprintf("%.0f s", s)
	}
	return strconv.FormatFloat(s, 'g', 3, 64) + " s"
}
