// Package sequence holds what `plan` leaves for the telescope and for the
// reduction: the mirror states and the list of exposures.
//
// A sequence is a folder. sequence.fits lists the steps (one exposure each),
// the code bits every step shows, which strip of mirrors each code column
// drives, and which mirror rows do not follow the code. masks/<MASKID>.png
// holds the mirror states of each distinct mask, profile.yaml and target.yaml
// the instrument and the target as they were when the sequence was planned,
// with the CSV files they name. Nothing else is needed later.
//
// The words:
//
//   - code column: one of the v columns of the code. It drives one element, or
//     no mirror at all (a dark column, which must decode to zero);
//   - element: a strip of mirrors across the dispersion, j = 0..n-1 in field
//     order; it spans an inclusive range of u, the strips are neighbours of
//     equal width, and ascending code columns drive ascending elements;
//   - u and w: coordinates along and across the dispersion, counted in mirrors.
//     Square mounting: u = column, w = row. Diagonal mounting (the device
//     turned by 45 degrees): u = column + row, w = row - column;
//   - step: one exposure, numbered from 1 in the order of the night;
//   - mask: the states of all mirrors in one step, one byte 0 or 1 a mirror,
//     row by row from the top left of its PNG (PNG x is the device's column,
//     PNG y its row). Its MASKID is the first 16 hex digits of the SHA-256 of
//     those bytes.
//
// The invariants, which Write holds and Read demands:
//
//   - a mirror of no element is off in every mask; a mirror of an element is on
//     where the step's code bit of the element's column is 1, unless its row
//     range says otherwise: a sentinel row shows its one element alone in every
//     science step, a closed row is off in every step (for one element, or for
//     all). Closed wins over sentinel;
//   - the row ranges that speak of all elements (coded, sentinel, closed of
//     element -1) tile the device's w without gap or overlap;
//   - bias, dark and all-off steps show the bits 0 and all-on the bits 1 in all v
//     columns; a science step shows code row ROW, dark columns holding the
//     code's own bits; a flat or arc with ROW -1 shows a lamp pattern (all on,
//     all off, every other element, one element), any other its code row;
//   - science steps come in complete cycles (CYCLE 1, 2, ...: every code row
//     once), coded flats in cycles of their own; every other step has CYCLE 0;
//   - PROFSHA and TARGSHA are the SHA-256 of profile.yaml and target.yaml, and
//     the SHA of a sequence is that of sequence.fits.
//
// The bits of a file are checked against the family, size and polynomial that
// its header names by rows made here: the rehearsal reads sequences, and must
// not reach the algebra of package hadamard even through this package.
package sequence
