// Package audit finds out which mask each science frame shows, from the frames' own
// light: the dark columns of the code, which no mirror feeds, decode to nothing only if
// every frame is taken for the mask that it shows.
//
// # Nouns
//
//   - sample: three columns of a detector row, added up, in all frames of a cycle; good
//     in all of them and struck by no cosmic ray.
//   - G: the sum over samples of y y'/s^2, y the readings of the cycle's frames. All
//     pairings are judged by G, without touching the data again.
//   - pairing: the frame of each code row. Its excess is the chi-square of the dark
//     columns beyond what noise gives, at the throughput that suits it best.
//   - erased row: one whose frame is not believed, or that has none. It costs one check.
//   - misfit: the chi-square by which a frame contradicts a mask, one degree of freedom a
//     sample.
//   - move: a change of one or two frames in a pairing.
//
// # How
//
// Contrasts alone are used (hadamard.Checks.WithoutPedestal), so that bias, dark current
// and leak do not matter. Throughput does, at 30 % over a night as much as a wrong mask:
// it is fitted anew for every pairing that is weighed (fit, by the estimator of
// hadamard.Checks.Throughput with its mean held).
//
// A cycle is judged (Judge) by moves from its labels: the best one is made as long as the
// odds are 1e6 to 1; and by pairings of all frames in the order of labels and of time. The
// odds of a move are those of two normal distributions whose distance follows from the
// frames' light (separation): since each pixel's light is free, the difference of
// chi-square alone would overrate moves wherever noise is more than the light.
// Frames that no mask explains are called unknown by the frame test, whose threshold
// holds the chance of one false alarm in a clean night at FalseAlarm (threshold).
//
// Where errors of the model (seeing, guiding) leave an excess in all frames, odds are
// weakened by it and a move must gain many times what is common.
//
// What noise gives must be right to a percent where frames are faint: dark current and
// the bias level of a row have a part in it, and hits are kept out of the frames without
// light that are taken off.
//
// Cosmic rays are left out twice: readings far above their pixel's series (strike), and
// those that contradict the checks of the pairing found where their frame does not
// elsewhere (clean); then the cycle is judged again, and rows that the sample grows by are
// cleaned under that pairing before they are added. It grows as long as some exchange of
// two frames is neither excluded nor harmless nor beyond what the largest sample could
// tell (sure).
//
// What no dark column sees: all masks flipped or shifted alike. All masks inverted turn
// the light negative, which is seen (Verdict.AllInverted).
package audit
