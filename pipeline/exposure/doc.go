// Package exposure turns raw frames of the night into electrons: which part of an
// image is which amplifier's, what their levels, gains and linearity are, and which
// samples are saturated or without a value.
package exposure
