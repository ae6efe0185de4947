// Command bench measures speed and memory and writes BENCHMARKS.md. It runs at
// the module's top folder after the build: `make bench`.
//
// Machines are noisy and differ, so that figures are ratios of what ran in turn
// within one run of bench: decoding beside a plain copy and a matrix product,
// other kernels beside a plain copy, and whole reductions beside numpy scripts
// that make the same products (testdata/bench), both synced to the disk.
package main
