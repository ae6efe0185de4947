// Package plan turns a target and an instrument profile into a sequence: which
// code, which strips of mirrors, which exposures in which order.
//
// The field is n elements, neighbouring strips of code.element_mirrors u each,
// centred on the device's u as well as whole mirrors allow, or field.offset_u from there.
// n follows from the target:
//
//   - code.v and code.dark given: n = v - dark;
//   - code.v alone: the largest n that leaves the default number of dark
//     columns, n = v - max(16, floor((v+1)/8)); a slit scan has n = v;
//   - no code.v: as many elements as the device's u and the detector allow, the
//     detector such that every element keeps the whole wavelength grid on it;
//     then v is the family's smallest code for them (see hadamard.Smallest), and
//     all columns left over are dark.
//
// A field that the target fixes may lose part of the grid at its edges: that is
// a warning, and an error only when an edge element has no wavelength of the
// grid on the detector.
//
// The night runs bias, dark, lamp flats (all on, even, odd, all off; then coded
// cycles), arcs of single elements, science with its all-off frames, then the
// reference star.
// Coded steps are in a random order drawn from code.seed unless code.order is
// natural. The same target and profile give the same sequence.
package plan
