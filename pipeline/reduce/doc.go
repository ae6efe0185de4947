// Package reduce turns a night of frames into a calibrated cube.
//
// # Stages
//
// prepare reads the calibration frames strip by strip and writes their masters
// to a scratch file (bias, dark rate, all-off rate, the variance of what is
// taken off, bad pixels). calibrate measures the optics by the lamp frames:
// wavelengths, trace, responses, neighbour term and leak. strips then goes once
// through the detector, one strip of rows of all science frames in flight and the
// next being read: to electrons, decoding, a window of decoded rows, resampling
// along the trace and in wavelength, and out to the cube.
//
// Between throughput and strips all that was found is written to a state (prepared.go),
// and strips keeps a journal of what it wrote and added up (journal.go, keeper.go). A run
// that resumes (resume.go) begins with them if all that the strips depend on is as it was
// (dependence.go).
//
// # Words
//
//   - slot: the place of a code row among the v rows that decoding takes. With
//     several cycles a slot holds the mean of its frames.
//   - window: decoded rows kept until no trace needs them; each is decoded once.
//   - level: what is taken off a science frame beyond its bias: dark current and
//     the all-off light.
//
// # Invariants
//
//   - Every product but run.json and report.html has the same bytes whatever the
//     number of workers and the memory: nothing depends on where a strip ends,
//     and sums over pixels are kept by detector row and added in row order.
//   - Poisson variances come from values that were not clipped at zero; only
//     their sum over the steps is floored.
//   - Nothing is held whole, neither a frame nor the cube, but what calibrate
//     looks at: one sum of lamp frames at a time, and the pixels' response.
//   - A run that was killed at any moment and resumed gives the same bytes.
package reduce
