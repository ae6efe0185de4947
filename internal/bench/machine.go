package main

import (
	"context"
	"fmt"
	"os"
	"os/exec"
	"runtime"
	"strings"

	"mirrorloom/hadamard"
	"mirrorloom/internal/child"
	"mirrorloom/pipeline/version"
)

// machine is what figures depend on.
type machine struct {
	model, memory, libraries string
}

// python is Debian's interpreter with numpy, scipy and astropy.
const python = "/usr/bin/python3"

// libraryVersions prints what the scripts compute with, and the kernels that OpenBLAS
// chose, by its own function: a library older than the processor may choose slower ones.
const libraryVersions = `
import ctypes, sys, numpy, scipy, astropy
kernel = "unknown"
with open("/proc/self/maps") as maps:
    for path in sorted({line.split()[-1] for line in maps if "blas" in line}):
        name = getattr(ctypes.CDLL(path), "openblas_get_corename", None)
        if name is not None:
            name.restype = ctypes.c_char_p
            kernel = name().decode()
print("Python", sys.version.split()[0] + ", numpy", numpy.__version__ + ", scipy", scipy.__version__ + ", astropy",
      astropy.__version__ + ", BLAS kernels", kernel)
`

func thisMachine(ctx context.Context) (machine, error) {
	cmd := exec.CommandContext(ctx, python, "-c", libraryVersions)
	cmd.Env = child.Environment()
	out, err := cmd.Output()
	if err != nil {
		return machine{}, fmt.Errorf("the scripts need Debian's python3-numpy, -scipy, -astropy and -yaml (make packages installs them): %w", err)
	}
	return machine{
		model:  procField("/proc/cpuinfo", "model name"),
		memory: procField("/proc/meminfo", "MemTotal"), libraries: strings.TrimSpace(string(out)),
	}, nil
}

// procField is the value of the first line "key : value".
func procField(path, key string) string {
	text, err := os.ReadFile(path)
	if err != nil {
		return "unknown"
	}
	for line := range strings.Lines(string(text)) {
		if k, v, ok := strings.Cut(line, ":"); ok && strings.TrimSpace(k) == key {
			return strings.TrimSpace(v)
		}
	}
	return "unknown"
}

func (m machine) write(b *strings.Builder) {
	fmt.Fprintf(b, "| machine | |\n| --- | --- |\n")
	fmt.Fprintf(b, "| processor | %s, %d cores |\n", m.model, runtime.NumCPU())
	fmt.Fprintf(b, "| memory | %s |\n", m.memory)
	fmt.Fprintf(b, "| mirrorloom | %s, %s, kernels of %s |\n", version.Version, runtime.Version(), hadamard.CPULevel())
	fmt.Fprintf(b, "| scripts | %s, BLAS with its default of %d threads |\n\n", m.libraries, runtime.NumCPU())
}
