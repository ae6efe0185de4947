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
//   - picture: the white light in the cube's own axes, element to the right and
//     row upwards, stretched so that arc seconds are square. North and east are
//     where the WCS of the file puts them.
//
// # Invariants
//
//   - Memory does not grow with the number of wavelengths: the cube is read in
//     rows of planes, and of a large cube only every so manieth plane (the page
//     says so).
//   - The page has the same bytes for the same folder and Input. Times come from
//     run.json alone.
//   - Every text from outside (names of files and targets, notes, settings) is
//     escaped by html/template; the SVG holds numbers and words of this package.
package report
