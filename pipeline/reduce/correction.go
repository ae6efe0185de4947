package reduce

// correction is what prepare found to be done to the science frames before
// they are decoded. Its slices have an entry a step of the sequence.
type correction struct {
	// offset is taken off a frame's readings, electrons, as its own level beyond
	// overscan, bias and dark.
	offset []float64
	// factor is 1+e = 1/c: readings less level and offset are multiplied by it.
	factor []float64
	// variance is the posterior variance of factor.
	variance []float64
	// leak is the factor a of the night: the light of all-off frames is taken off
	// corrected readings a times.
	leak float64
	// terms are parts of the light that vary apart from it; nil for none.
	terms *terms
}

// noCorrection changes nothing.
func noCorrection(steps int) *correction {
	c := &correction{
		offset: make([]float64, steps), factor: make([]float64, steps), variance: make([]float64, steps), leak: 1,
	}
	for i := range c.factor {
		c.factor[i] = 1
	}
	return c
}

// of is what is done to the frame of a step; nothing if c is nil.
func (c *correction) of(step int) (factor, offset, variance float64) {
	if c == nil {
		return 1, 0, 0
	}
	return c.factor[step], c.offset[step], c.variance[step]
}

// leakFactor is leak; 1 if c is nil.
func (c *correction) leakFactor() float64 {
	if c == nil {
		return 1
	}
	return c.leak
}
