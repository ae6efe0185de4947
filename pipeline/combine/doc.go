// Package combine puts the cubes of several runs together: repeated or dithered nights,
// or cycles of one night, reduced each by itself.
//
// The runs' voxels must be the same places in wavelength and, but for a whole number of
// elements and rows, on the sky; what is not is to be reduced onto another run's voxels.
// The combined cube spans all of them. In each voxel
//
//	SIGNAL = sum(S_i / V_i) / sum(1 / V_i),   VARIANCE = 1 / sum(1 / V_i)
//
// over the runs i in which it is good, V_i their VARIANCE, which holds the error scale of
// each run where that is above 1. Where it is good in none, it is that of the runs that
// have light of it, and their flags say why it is not good. FLAGS are the flags of the
// runs that count, together; SCALE is the mean of theirs by their shares in VARIANCE.
//
// V_i depends so little on the noise of S_i itself (by a part of 1/v at most in a coded
// night) that the weights do not bias the mean.
package combine
