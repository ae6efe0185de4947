package calib

// ToElectrons turns raw values into electrons, in place: (v - levelADU) gain. level
// is the row's bias level (overscan, or the profile's bias), gain electrons per ADU.
func ToElectrons(values []float32, levelADU, gainEPerADU float64) {
	level, gain := float32(levelADU), float32(gainEPerADU)
	for i, v := range values {
		values[i] = (v - level) * gain
	}
}

// Subtract takes scale times master from values, in place: a master bias (scale 1)
// or a dark (scale = ratio of exposure times).
func Subtract(values, master []float32, scale float64) {
	s := float32(scale)
	master = master[:len(values)]
	for i := range values {
		values[i] -= s * master[i]
	}
}

// ReadVariance is the variance of a pixel without light, in electrons squared: read
// noise, and the rounding of the converter to whole ADU, gain^2/12.
func ReadVariance(readNoiseE, gainEPerADU float64) float64 {
	return readNoiseE*readNoiseE + gainEPerADU*gainEPerADU/12
}

// FlagSaturated sets Saturated where a raw value, before anything is taken from it,
// is at or above levelADU, and returns how many it found. NaN is not.
func FlagSaturated(flags []Flag, rawADU []float32, levelADU float64) int {
	n := 0
	level := float32(levelADU)
	flags = flags[:len(rawADU)]
	for i, v := range rawADU {
		if v >= level {
			flags[i] |= Saturated
			n++
		}
	}
	return n
}
