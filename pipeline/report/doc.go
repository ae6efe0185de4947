// Package report writes report.html: one page that says whether a cube can be
// trusted, shows it, and lists what it was made of.
//
// The page is one file without scripts that asks nothing of a network: style,
// pictures and charts are within it. It opens from disk and prints.
//
// # Words
//
//   - place: an element and a detector row of the cube, both counted from 0;
//     its voxels along the third axis are a spectrum.
//   - white light: the mean of a place's good voxels (FLAGS & FLAGBAD = 0).
//   - picture: light in the cube's own axes, element to the right and row
//     upwards, stretched so that arc seconds are square. North and east, and the
//     grid of right ascension and declination, are where the WCS of the file
//     puts them.
//   - survey: some spectra all over the field, by which lines and flags are found
//     without reading the whole file.
//   - check: one thing that has a bearing on trust, with its figure; the verdict
//     is the worst of the checks (Judge).
//
// # Invariants
//
//   - Memory does not grow with the number of wavelengths but for the spectra that
//     are drawn.
//   - Judge looks at the figures of run.json and at the ledger alone, never at
//     texts, so that whoever reads a run's folder comes to the same verdict.
//   - The page has the same bytes for the same folder and Input. Times come from
//     run.json alone.
//   - It is black on white with greys and one dark colour, and nothing is told by
//     colour: it is read in grey as well.
//   - Every text from outside (names of files and targets, notes, settings) is
//     escaped, by html/template or, in drawings, by package drawing.
package report
