// Package register finds listed stars in the white light of a cube and learns from them
// where the cube lies on the sky.
//
// Peaks of the picture are found and measured (calib.FitCentroid); listed stars are matched
// with them by trying, for the correction that is asked for, every pair of few that fixes
// one, and keeping that by which most stars find a peak; the map is then fitted to the
// matches with wrong ones thrown out (calib.FitPlaneMap). What may be corrected:
//
//   - pointing: where the field's middle is, and a small turn;
//   - similarity: that, any turn, one scale along both axes, and the parity.
//
// A Registration is what that says of the device and the telescope: it is written to
// registration.yaml, by which plan points the next sequence.
package register
