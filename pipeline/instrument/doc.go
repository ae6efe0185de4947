// Package instrument reads profiles: the parameters of a telescope, a
// micromirror device (DMD), a spectrograph and a detector that belong together.
//
// A profile is parameters only. Nothing here maps a mirror to a pixel: the
// rehearsal and the reduction each do that on their own, so that an error of
// one cannot cancel in the other; only the scalar facts that both must agree on
// (the ranges of u and w, their middle, the scale on the sky, where a raw
// section lies among the light-sensitive pixels) are derived here.
//
// Words: u runs along the dispersion and w across it, in mirrors. In the
// square mounting u = column and w = row of the device; in the diagonal one,
// the device turned by 45 degrees, u = column + row and w = row - column, and
// only pairs with u and w both even or both odd are mirrors. Active pixels
// are the detector's light-sensitive ones, counted from 0, x along the
// dispersion; raw pixels are those of a frame's file, counted from 1 as FITS
// does, overscan included.
//
// With l = wavelength - center_nm in vacuum nanometres and q = y - y_center_px,
// the profile's spectrograph means, for element j of n and mirror w,
//
//	x = x_center_px + u_step_px (o + m (j - (n-1)/2)) + d1 l + d2 l^2 + d3 l^3 + slit_tilt q + smile_per_px q^2
//	y = y_center_px + w_step_px (w - wc) + trace_tilt (x - x_center_px) + trace_curve_per_px (x - x_center_px)^2
//
// m mirrors an element, o the whole mirrors by which the field lies beyond the device's
// middle, wc the middle of w.
//
// Invariants: a *Profile from Load or Parse has passed every check of Validate;
// YAML of it is the same text on every machine and reads back as an equal
// profile; no method changes it. u_step_px and w_step_px are positive: a camera
// that turns the image about is described by the sign of dispersion_px_per_nm
// and by numbering the detector's rows upwards with w.
package instrument
