// Package fitsutil reads and writes FITS files (FITS Standard 4.0, 2018): headers,
// image rows by offset, binary tables, streamed cubes, checksums and atomic files.
// It is a leaf: it knows what a file says and not what it means.
//
// # Words
//
//   - block: 2880 bytes; headers and data are filled up to whole blocks.
//   - card: one keyword record of 80 bytes. A string too long for one card goes on in
//     CONTINUE records, which belong to the card they continue.
//   - header: the cards of an HDU up to END. It keeps the bytes of every card it has read,
//     so that an untouched header is written back as it was.
//   - HDU: a header and its data; index 0 is the primary one.
//   - image: an HDU with pixels. Axes are in FITS order (Axes[0] = NAXIS1 runs fastest);
//     row y holds NAXIS1 pixels; a plane holds NAXIS2 rows; planes count over all higher axes.
//     Rows, columns and planes count from 0.
//   - stored and physical value: physical = BZERO + BSCALE stored (Standard 4.4.2.5). Every
//     reader gives physical values as float32; a stored BLANK reads as NaN.
//   - table: a binary table (BINTABLE), held in memory whole; a column: its values of all rows.
//   - cube: a file whose images are written strip by strip, a strip being rows of some planes.
//   - lane: the offset of a byte modulo 4, all that its part in a checksum depends on.
//
// # Invariants
//
//   - Input never panics. Whatever is wrong with a file or a card is one *Error, which names the
//     file, the HDU, the card or the offset, what is wrong and the cure, and unwraps to a
//     sentinel (ErrTruncated, ErrMissingCard, ...). With an error every other result is nil.
//   - The structure is strict: SIMPLE or XTENSION first, integer BITPIX, NAXIS and NAXISn within
//     the Standard's limits, an END card, all data bytes present. Foreign cards are lenient: a
//     card whose value cannot be understood is an error only to whoever asks for that card.
//   - A file ends with its last HDU. Behind it two things are tolerated and ignored: fewer bytes
//     than one block, and any number of zero bytes (old tape blocking). More is an error, as a
//     damaged extension would vanish unseen. The fill of the last block may be missing.
//   - A File, its HDUs and its images may be used by several goroutines at once; a Header may be
//     read by several as long as none changes it.
//   - Readers hold no pixels between calls: their buffers come from a pool, and in steady state a
//     call allocates nothing.
//   - A written file appears under its name whole or not at all: it is made under a temporary
//     name beside it (.NAME.xxxxxxxx.part), synced and renamed; its room is reserved first.
//   - Every written HDU has CHECKSUM and DATASUM. Bytes depend on what is written alone: not on
//     the clock, the order of strips or the number of goroutines.
//   - A caller's header gives cards, never structure: the structural and scaling cards in it
//     are left out and made anew. What was read can be given back to be written.
//
// Not read: tile-compressed images (a typed error says so) and random groups.
package fitsutil
