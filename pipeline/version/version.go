// Package version holds the one place where mirrorloom's version is written.
package version

// Version is what `mirrorloom version` prints and SOFTVERS carries in every
// product: the same source gives the same text, so no build time or commit is
// in it.
const Version = "0.1.0"
