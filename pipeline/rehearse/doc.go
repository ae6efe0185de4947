// Package rehearse draws the night that a sequence would give: the raw frames
// of every step, made from a scene by a forward model of its own, and the truth
// that a reduction of those frames should find.
//
// # Words
//
//   - scene: the sources on the sky, the seeing and the sky's own light;
//   - light: what reaches the mirrors in a step, the sky or a lamp, in detected
//     electrons per second;
//   - emitter: one source of a light: how much of it each mirror collects (the
//     fraction), its continuum and its lines;
//   - beam: mirrors that always switch together: one element's in the coded rows,
//     one element's in one range of sentinel rows;
//   - air: what an atmosphere does to the sources, dimmed and moved anew in every
//     step; the sky's own light is that seen from the ground;
//   - fault: something that goes wrong in the night on request (see Fault).
//
// # Model
//
// Pixel centres are integers from 0. A mirror (u, w) sends its light of vacuum
// wavelength L to (X, Y) with
//
//	X = x_c + u_step (u - u_mid) + d1 l + d2 l^2 + d3 l^3 + slant(Y - y_c)
//	Y = y_c + w_step (w - r_c) + trace(X)
//	slant(q) = slit_tilt q + smile q^2
//	trace(x) = trace_tilt (x - x_c) + trace_curve (x - x_c)^2
//
// l = L - L_c, u_mid the middle of the strips, r_c the middle of the device's w.
// There it makes a circular Gaussian spot of standard deviation
// lsf_fwhm_px/2.3548. An element's light is the sum over its mirrors,
//
//	f(x, y) = sum_w int dX h_w(X) G(x - X) G(y - Y_w(X)),
//
// h_w(X) the electrons per pixel along the trace of mirror row w. A line is a
// Gaussian in X of its own width, or a point without one. A frame holds
// the integrals of f over pixels, the truth those over voxels: wavelengths
// between the edges of the grid, rows between y0 - 1/2 and y0 + 1/2 following the
// trace, both from the same h_w, so that nothing but a reduction can make them
// differ. Mirrors that do not move are left out of an element's light in frames, and
// shine in all of them if they are stuck on; the truth is that of an element whose
// mirrors all move. See draw.go and voxel.go for how the integrals are made, with their
// accuracy.
//
// # Invariants
//
//   - The package shares no mapping, drawing or algebra with the reduction: it
//     imports neither hadamard nor calib, only calib/physics.
//   - The bytes of a night depend on sequence, scene and Options other than
//     Workers and MemoryBytes: random numbers are keyed by (seed, purpose, step,
//     row), and no sum depends on how rows are grouped.
//   - No more than a strip of detector rows of all frames is in memory; frames
//     grow in one scratch file and are written one after the other.
package rehearse
