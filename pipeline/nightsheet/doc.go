// Package nightsheet makes of a plan what an observer takes to the telescope: plan.html, two
// pages of A4 in one file without scripts and without a network, and plan.json, all of it for
// programs.
//
// # Words
//
//   - sheet: everything that the two files say (Sheet);
//   - run: steps behind each other that are alike, a line of the table of steps;
//   - block: a part of a page whose height is known before it is laid out.
//
// # Layout
//
// Lengths are points, 72 to the inch. Words are measured in the font that the page carries
// (package typeface), so that the height of every block is known here, and lists are cut
// where the page ends; what is left out is said, and plan.json has it.
//
// The same plan gives the same bytes.
package nightsheet
