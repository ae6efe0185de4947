// Package extraction judges what extract takes out of cubes: the scatter of
// apertures over nights that differ in their seed alone against the errors quoted,
// and maps of lines against those of the truth. Tests and `make validate` share it.
package extraction
