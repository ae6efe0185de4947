// Package product holds what mirrorloom writes and reads again: the schema of
// the cube with its world coordinates, the element cube, the ledger of frames
// and run.json. It knows names, axes, units and flags, and no algorithm.
//
// # Words
//
//   - cube: decoded spectra on the sky; axes (element, detector row,
//     wavelength) in FITS order, NAXIS1 = n elements runs fastest.
//   - voxel: one sample of the cube. Axis 2 counts detector rows by the row
//     their trace has at x = x_c.
//   - element cube: decoded data in detector coordinates; axes (x, y, column).
//   - flag: a bit of FLAGS; a voxel is good when FLAGS & FlagBad == 0.
//   - ledger: the table that pairs frames with steps, with a verdict each.
package product
