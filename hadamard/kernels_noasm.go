//go:build !amd64 || noasm

package hadamard

func bestLevel() level { return pureGo }

// passesOf and sumsOf are the kernels of a level that bestLevel allows.
func passesOf(level) passes { return portablePasses }

func sumsOf(level) sums { return portableSums }
