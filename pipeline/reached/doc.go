// Package reached measures in a cube what the plan's forecast wanted of it, so that what was
// reached stands beside what was expected, and says what explains the difference.
//
// # Words
//
//   - light: that which a measurement wants, of a source or of its lines;
//   - unwanted light: all other light in the same voxels, of the sky, of other sources, of
//     the continuum below a line;
//   - beside: voxels near a measurement's, at other wavelengths (of a line) or in a ring
//     about it (of a band).
//
// # Comparison
//
// Both sides add up the same voxels with the same weights, in detected electrons of one
// science exposure, before sky and flux. The error of the sum is compared with the
// forecast's sigma: that of all light in those voxels, with the covariances of extract. What
// taking off unwanted light adds to it is stated apart, for no forecast has it.
//
// With w the forecast's light and u its unwanted light, in the measurement (A) and beside it
// (R), a cube's sums are
//
//	M_A = s w_A + b u_A,    M_R = s w_R + b u_R,
//
// two equations for the factors s and b by which the sky and the sources are brighter than
// forecast. So wings of a star in the ring about it count as the star's, and an uneven
// background is taken off as uneven as it is forecast. Where they cannot tell the two apart
// (a nebula that fills the ring), b is that beside the other measurements, or 1. Where the
// reduction took the sky off, u is without it.
//
// The forecast is made twice: for the plan, and for what was taken: the frames used, the
// voxels that are good, the throughput's error, the place that stars gave the field; once more
// with the throughput's error that the plan expects. So the ratio of S/N is a product of four:
// by frames and voxels, by the error of the throughput, by the light, by the noise. It is said
// to be as forecast where none of them is off beyond its error, and all of it by no more than a
// forecast is good to.
package reached
