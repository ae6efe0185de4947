// Package trade holds ways to observe a field against each other, and against
// the slit scan, by what a forecast gives of them.
//
// # Words
//
//   - figure: the S/N that a target's aim is about (forecast.Figure);
//   - field: n elements of m mirrors each, which all candidates of it share: a
//     code that saw less of the sky would be another observation, not a better one;
//   - budget: the wall-clock time of all exposures, the same for all candidates;
//   - row: a candidate with what it gives, or with the limit that it breaks.
//
// # Candidates
//
// Every family gives, to every field, its smallest code with dark columns enough
// for the limits and its smallest code with the default number of them; the slit
// scan has none. The budget is filled: in one cycle, or in as many as the limit on
// a cycle's time and the brightest pixel ask for; where a cycle more would make the
// dwell much shorter than saturation asks, time is left over instead. Rows whose
// brightest pixel belongs to a star that nobody wants are tried again with the
// mirrors on that star closed.
//
// # Dark columns
//
// g >= 4 k for k lost frames; and g such that of 1000 pixels at most one is struck
// by more than g/4 cosmic rays, which are as many as can be restored. With fewer
// than 2 log2 v columns nothing can be audited or restored, so that is the least in
// any case. None of this is asked of a slit scan: a frame lost is an element lost.
//
// # Cycles
//
// What changes within a cycle and is no factor per frame upsets decoding, and dark columns
// cannot tell how. The shortest of the target's cycle_s and of the times in which refraction
// moves what is wanted by 0.35 elements, flexure the image by 0.35 px and the seeing changes by
// 35 % (a tenth each in rms) bounds the cycles of codes (CycleLimit); a slit scan is bound by cycle_s alone. The
// rate of refraction is that in the middle of the science frames.
package trade
