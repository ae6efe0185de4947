// Package trial runs whole nights on instruments small enough for a test -
// planned, rehearsed, reduced - and judges the cubes against the truth. The
// tests of the reduction and `make validate` share it, so that both ask the same
// questions of small nights and of the demo's.
//
// # Words
//
//   - field: an instrument, a target and a sky, from which a night is made;
//   - finding: a figure that is required and what was measured;
//   - twin: the same night without noise: it tells what was to be expected of
//     every voxel without any noise of its own.
//
// # The rule of judging
//
// A finding fails beyond the required figure or 5 standard errors, whichever is
// larger. The standard errors count independent samples: a decoded pixel is one,
// and of resampled voxels, whose neighbours share pixels, every second.
package trial
