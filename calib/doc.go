// Package calib turns detector frames into calibrated light: levels, bad pixels,
// the mapping between pixels and wavelengths, and resampling that keeps the flux.
// Plain slices in and out; no files, no sequence, no profile. It is for the
// reduction only: a rehearsal has its own forward mapping, so that an error in
// one cannot cancel itself in the other.
//
// # Nouns
//
//   - A row is nx values of one detector row, float32; a block is rows one after
//     the other, width nx; a stack is [frame][pixel].
//   - An amplifier's overscan is a block of pixels without light, one row for each
//     row of its data.
//   - A trace row y0 is the light that crosses detector row y0 at x = X_c: at column
//     x it lies t(x) rows higher. ShiftRows straightens it.
//   - A voxel lies between two edges along x, on one trace row; Resampler fills it.
//   - A weight is the share of a pixel's value that goes into a voxel.
//   - A Flag is a set of bits; it travels with weights: see reachLimit.
//   - A PixelResponse belongs to the detector's pixels and is taken out of frames, or
//     of decoded pixels; a Response belongs to elements, trace rows and voxels and is
//     taken out of the cube. Both have a mean of 1: what is common to all is the
//     lamp's.
//   - A Peak is a line of a lamp seen in the sum of a block of detector rows; a track is
//     a line followed over the blocks of a frame. SolveArcs names them and fits the
//     Geometry's x; FitTrace fits its y to RowEnds, where lit mirror rows end.
//   - A Strike is a pixel of one frame that a cosmic ray hit, as its sharp edges tell
//     (EdgeRule), with the value of the light around it; a StandIn is what it would have
//     read by the other frames at its pixel.
//   - A ColourTerm is a small part of the light that grows smoothly with wavelength:
//     what open neighbours lend each other, or what closed mirrors leak.
//
// # Invariants
//
//   - Pixel i covers i-0.5 to i+0.5. Rows and columns count from 0.
//   - Resampling is linear in the values: signal = sum w v, variance = sum w^2
//     var, with the same weights, exact for independent pixels.
//   - Neighbouring voxels share the weights of their common edge: the light of
//     voxels that tile a range adds up to the light of the range.
//   - A voxel is NaN exactly where it is NoData.
//   - Nothing here depends on which rows are processed together or by whom.
package calib
