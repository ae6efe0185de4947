// Command bench measures speed and memory and writes BENCHMARKS.md. It runs at
// the module's top folder after the build: `make bench`, or for some sections alone
//
//	go run ./internal/bench -only floor
//
// Machines are noisy and differ, so that figures are ratios of what ran in turn
// within one run of bench: decoding beside a plain copy and a matrix product, other
// kernels beside a plain copy, whole reductions beside numpy scripts that make the same
// products (testdata/bench) and beside a program that only moves the bytes. Both sides
// of a reduction end with their product synced to the disk.
//
// A section lies in a file of its own and is listed in sections. Nights are rehearsed
// from testdata/bench with a few lines exchanged (nightPlan); -nights keeps them for
// another run. All sections need 45 GB of disk.
package main
