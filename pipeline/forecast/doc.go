// Package forecast tells before the night what S/N it will give: for a target with a
// forecast, a profile and a candidate (code, elements, dwell, cycles), electrons in every
// pixel, S/N of what is wanted by voxel, line and band, the brightest pixel, and the time;
// and the same for a slit scan whose night takes as long.
//
// # Words
//
//   - wanted: a measurement, the light of a source or a place in a line or a band;
//   - candidate: a way to observe the field;
//   - piece: a source, or the part of its wavelengths that refraction leaves in one
//     place, with its image on the mirrors and its spectrum on the detector;
//   - share: the part of a piece's light that mirrors of one u put on a trace row;
//   - own light: that of an element; overlap: that of all elements, at one pixel.
//
// # Light
//
// Pixel centres are integers from 0. Stars and Gaussian sources are Gaussian behind the
// seeing, so that a mirror's part is a product of two differences of error functions;
// rings and galaxies are convolved with the seeing numerically. A mirror's spot is a
// Gaussian on the detector: the part of a mirror row's light on a trace row is again a
// difference of error functions, and along x a continuum is tabulated once, spread and
// integrated over pixels. Photons come from AB magnitudes (3631 Jy, Oke & Gunn 1983; see
// calib/physics), black bodies and line fluxes, times the collecting area, the throughput
// and the transmission of the air.
//
// # Noise
//
// W'W = (k-l)I + lJ is all that is known of the code (hadamard.Design): any family, any
// choice of dark columns. With f the own light, F the overlap, electrons a frame, a pixel's
// decoded element has the variance
//
//	g PhotonVariance(f, F) + ReadNoiseVariance (R^2 + gain^2/12 + g (dark current + leak))
//
// over the number of cycles, g and R those of the read mode, plus that of the level taken
// off all frames over k^2. Two elements i, j of a pixel have, in the mean over all ways to
// give columns to elements, the covariance
//
//	-l/(k^2 (k-l)) (R^2 + ...)  -  g l/(k (k-l) (v-2)) (F - f_i - f_j)
//
// and the level's variance. Voxels take pixels with the weights of the reduction (rows
// straightened, then wavelengths), so that a voxel's variance is the sum of squared
// weights, and that of a sum over voxels counts pixels that several share. What is not
// known of the frames' transmission behind its correction is that of reduce's own fit on the
// forecast's light; it moves all pixels of a frame, so that it adds up over a sum (see sum.shaken),
// and adds hadamard.Design.ThroughputNoise to a voxel.
//
// Not in it: calibration by lamps, faults, scattered light, the neighbour term, sentinel
// rows (they are taken for closed), and sky subtraction, whose error is common to the field.
package forecast
