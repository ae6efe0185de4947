package hadamard

import "runtime"

// level is an instruction set that the kernels are written for. All levels give
// the same bits.
type level int

const (
	pureGo level = iota
	avx2
	avx512
)

func (l level) String() string {
	switch l {
	case avx2:
		return "AVX2"
	case avx512:
		return "AVX-512"
	}
	return "pure Go"
}

// levels are those that this processor and this build have, the best one last.
func levels() []level {
	all := []level{pureGo}
	for l := avx2; l <= bestLevel(); l++ {
		all = append(all, l)
	}
	return all
}

// CPULevel names the architecture and the instruction set that decoders work
// with here, such as "amd64 AVX-512" or "arm64 pure Go". The build tag noasm
// leaves pure Go alone. Results do not depend on it.
func CPULevel() string { return runtime.GOARCH + " " + bestLevel().String() }
