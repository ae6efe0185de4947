// Package pair finds the frame of every step: it reads the headers of a night
// and writes the ledger.
//
// # Words
//
//   - night: a folder of frames. Frames are the files *.fits and *.fits.gz
//     directly in it; hidden files and subfolders are never looked at.
//   - label: what a frame's header says of it (step, mask, kind, exposure,
//     time, instrument, size), by the profile's keywords, looked up in the HDU
//     of the image first and in the primary header next.
//   - to hold a step: to be the frame shown in the step's row of the ledger. A
//     frame holds a step for better (verdict ok) or worse (wrong-mask,
//     wrong-exposure, wrong-size).
//
// # How frames find their steps
//
//  1. By the STEP card. MASKID, KIND, EXPTIME, INSTRUME and the size must then
//     agree with the step; a card that is not there is not checked, and the
//     note says so.
//
//  2. Without STEP, by MASKID, KIND and EXPTIME among the steps that no frame
//     holds yet. Steps that agree in all three are alike and exchangeable for
//     the decoding: their frames are given out in the order of DATE-OBS.
//
//  3. Without MASKID, by the order of DATE-OBS among the steps of the frame's
//     kind and exposure, only if there are as many frames as steps (or the
//     steps are alike) and all times differ.
//
//     With the audit, science frames of a single cycle may be one fewer or one more:
//     it finds the place.
//
// What these rules leave undecided gets the verdict extra and a note; nothing is
// guessed. Of several good frames of one step the one taken last holds it (a
// frame is repeated because the first was not good); of equal or unknown times
// the first by name. The others are duplicates.
//
// Kinds that contradict the step, masks of no step and frames of another
// instrument are extra.
//
// The audit by the dark columns (package audit), if it is asked for, comes between
// matching and writing the ledger: frames that show another step's mask are given to
// that step (verdict relabelled, matched by audit), frames that show no mask of their
// own are of a wrong mask, and the notes say what they show and how sure that is.
//
// # Invariants
//
// Ledger[i] is the row of step i+1 for every step of the sequence; the frames
// that hold no step follow with Step 0, by file name. The result depends on the
// headers alone, or with the audit on the science frames too, not on the number of
// workers.
//
// Cost: headers only, one file open a worker at a time. A gzip file has to be
// unpacked whole into the scratch folder to find its headers, which takes about
// as long as gunzip, and room for one frame a worker.
package pair
