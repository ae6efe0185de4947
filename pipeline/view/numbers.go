package view

import (
	"math"
	"strconv"
)

// numbers are null in JSON where they are none.
type numbers []float64

// MarshalJSON writes as many digits as read back.
func (x numbers) MarshalJSON() ([]byte, error) {
	text := make([]byte, 0, 12*len(x)+2)
	text = append(text, '[')
	for i, v := range x {
		if i > 0 {
			text = append(text, ',')
		}
		if math.IsNaN(v) || math.IsInf(v, 0) {
			text = append(text, "null"...)
		} else {
			text = strconv.AppendFloat(text, v, 'g', -1, 64)
		}
	}
	return append(text, ']'), nil
}
