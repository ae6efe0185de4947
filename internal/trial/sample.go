package trial

import (
	"fmt"
	"math"
)

// Sample is independent measurements of one quantity. The zero value is empty.
type Sample struct {
	n           int
	sum, square float64
}

// Add adds a measurement.
func (s *Sample) Add(x float64) {
	s.n++
	s.sum += x
	s.square += x * x
}

// N is how many there are.
func (s *Sample) N() int { return s.n }

// Mean is their mean, NaN of none.
func (s *Sample) Mean() float64 { return s.sum / float64(s.n) }

// RMS is the root of their mean square, about 0.
func (s *Sample) RMS() float64 { return math.Sqrt(s.square / float64(s.n)) }

// StandardError is that of the mean, from the scatter; NaN of fewer than two.
func (s *Sample) StandardError() float64 {
	n := float64(s.n)
	return math.Sqrt(max(0, s.square-s.sum*s.sum/n) / (n - 1) / n)
}

// String is mean, its standard error and the rms.
func (s *Sample) String() string {
	return fmt.Sprintf("mean %.4g +- %.2g, rms %.3g of %d", s.Mean(), s.StandardError(), s.RMS(), s.n)
}
