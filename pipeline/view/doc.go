// Package view serves one run to a browser on the same machine: a page, and what the page
// asks for, computed from the cube.
//
// # Words
//
//   - layer: what a picture shows of the voxels of a band, one value an element and row;
//   - band: channels from..to, inclusive, counted from 0;
//   - group: groupPlanes neighbouring planes, whose sums over wavelength are kept;
//   - the folder: where what is made once is kept, RUN/.cache where it can be written.
//
// # What is read
//
// Planes are read by offset, and bands of many planes from the sums of groups. Spectra are
// extract's, from its cache of rows once that is made; until then from the cube, which takes
// longer and gives the same. Nothing of the cube is held.
//
// # Who may ask
//
// Handler answers GET and HEAD alone, and only where the Host header is the address that
// it serves, so that no foreign name that resolves to this machine reaches it. It opens no
// file by a request: answers are computed, or are files that the program carries. What a
// query may ask is bounded in size, and so is how many answers are computed at a time.
package view
