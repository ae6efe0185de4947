// Package extract takes spectra, narrow-band images and maps of lines out of a
// cube, with errors that know what decoding and resampling put between voxels.
//
// # Words
//
//   - shape: an outline on the sky, or elements and rows by number;
//   - cell: an element and a row of the cube, with the part of it that lies in the
//     shape;
//   - spectrum: sums over cells, one a wavelength; a channel is one of its values;
//   - band: a range of wavelengths, whose channels are added up, less a continuum
//     from side bands if there are any;
//   - naive error: the root of the sum of VARIANCE, which takes voxels for
//     independent.
//
// # Errors
//
// A sum over voxels, sum_i w_i S_i, is linear in the pixels of the frames. The
// weights are carried back, first to the detector's columns (the weights of
// resampling along x), then to its rows (those of straightening the trace): g_j(p)
// is then the weight of element j's light at pixel p, and with the inverse A of
// the code, s_k^2 the variance of step k's sample at p,
//
//	variance = sum_p ( sum_k s_k^2 (sum_j g_j A_jk)^2  +  c (sum_j g_j)^2 )
//
// c is the part of an element's variance that is common to all of a pixel: what
// was taken off all frames. Samples of different pixels are independent. s_k^2 is
// rebuilt from the cube: the light of all elements at p, by the code, on top of a
// level that makes the mean over the steps that of PIXELVAR. Added are the errors
// of the pixels' response, of the slit function (shared by the voxels of an element
// and row), of the efficiency (by the rows of an element, and taken as shared by
// neighbouring wavelengths) and of the frames' throughput.
//
// Each voxel's weight is scaled so that its own variance is VARIANCE, which therefore
// may have been scaled by a measured error scale or a flux calibration. (Where the
// throughput has errors it is a little more: reduce takes them for independent in the
// pixels of a voxel as well.) Of samples that were restored see erasure.
//
// Voxels and the light behind them come from the cube's images or from a cache of them by
// rows (MakeRows, WithRows), which gives the same bits in a part of the time.
//
// A combined cube is the mean of runs by shares o_iv. Its runs are opened, and the
// variance of a sum is the sum over them of what the weights w_v o_iv give in run i: runs
// are taken to be independent, as nights are. What cycles of one night share (lamp and
// bias frames, the errors of responses with them), and nights that were calibrated by one
// star (the flux), counts as if it were not shared, here as in VARIANCE: the error of a
// sum that such an error rules comes out too small, by a root of 2 for two equal runs.
package extract
