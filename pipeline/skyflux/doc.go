// Package skyflux brings a finished cube in counts to the sky: it takes the light of the
// blank sky off and turns counts into flux.
//
// # Words
//
//   - plane: all elements and rows of one wavelength. The cube is read and written plane by
//     plane, several times; it is never held. A place is an element and row.
//   - look: what one pass tells of every place: its light above the middle of its plane, in
//     white light and in bands of a few voxels.
//   - blank: places that no source reaches, chosen by calib.SkyRule from a look, or named.
//   - star: the reference star, whose flux is known.
//
// # Invariants
//
//   - Sums over wavelengths are added plane after plane, sums over places by row and element:
//     products do not depend on memory and workers.
//   - What all places share, the errors of the sky and of the sensitivity, is in VARIANCE of
//     every voxel, and in tables of its own (product.SkyRecord, product.FluxRecord) from
//     which extract knows it.
package skyflux
