// Package hadamard holds the codes of multiplexed exposures: 0/1 design
// matrices, their decoding, the variances that decoding leaves, the choice of
// dark columns, and the theory of what multiplexing gains. It does no I/O.
//
// # Nouns
//
//   - code: the v x v design matrix W of zeros and ones. Row i is a coded step
//     (one exposure), column j a code column (one strip of mirrors, or none).
//     W[i][j] = 1: column j is open in step i.
//   - v, k, l: the code's size, the ones in each row and in each column, and
//     the ones that two rows (or two columns) share.
//   - family: how W arises. An m-sequence has v = 2^p - 1, a Legendre code a
//     prime v = 3 mod 4, a twin-prime code v = p(p+2), a Singer code v =
//     (q^(d+1)-1)/(q-1); each has a complement; the slit scan is W = I.
//   - A: the inverse of W. Its row j decodes column j.
//   - open and closed entries: A holds only a = 1/k where W' is 1 and
//     b = -l/(k(k-l)) where it is 0.
//   - dark column: a code column that no mirror is assigned to. Its decode must
//     be zero, so it checks the others. A dark set has g of them, and Ag is
//     A's g x v submatrix of the dark rows; Ag's columns stand for steps.
//   - check: a vector u of Ag's row space. u'y holds no light, so that it shows what
//     went wrong in the readings y. P projects on the checks (Checks).
//   - Gram: the sum of y y'/s^2 over sampled pixels, all that is kept of the data to
//     judge frames by (Gram).
//   - hold-out: what is fitted on some of the dark columns is judged on the others.
//   - block: measurements as [row][pixel] of float32, row i at
//     block[i*stride : i*stride+pixels]. Rows are code rows (steps in the
//     order of the code, not of the night) or code columns, as said.
//
// # Invariants
//
//   - Every family but the slit scan is cyclic: W[i][j] = s[(i+j) mod v], so row
//     i+1 is row i shifted left by one and W is symmetric.
//   - W'W = (k-l)I + lJ with J all ones, and k(k-1) = l(v-1). Codes with k = 2l
//     (v = 4l-1) are S-matrices: |a| = |b| = 2/(v+1), and all columns of a pixel have
//     the same variance. Singer codes (but a complement of q = 2), complements and
//     the slit scan are none; the formulas hold for any cyclic difference set.
//   - A Code and a Decoder never change and serve any number of goroutines.
//   - A pixel's result depends on that pixel's samples alone: not on the
//     stride, the number of pixels or its place among them, bit for bit. Sums
//     run in one fixed order, without fused multiply-add where it could round
//     differently, so that all instruction sets (CPULevel) give the same bits. A sample that is NaN or infinite spoils its pixel only.
//   - Methods that take blocks check their lengths and panic with a text that
//     starts "internal error" when a block is too short: sizes are the caller's
//     invariant, never input. Everything that input can get wrong is an error.
//   - Papers are cited from memory where testdata/README.md names no other origin;
//     every formula is also checked by numbers.
//   - Units: whatever the samples carry (electrons), variances its square.
package hadamard
