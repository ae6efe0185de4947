package main

import (
	"bufio"
	"bytes"
	"context"
	"fmt"
	"os"
	"os/exec"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// kernel is a benchmark of a package that counts its bytes.
type kernel struct {
	pkg, name string
	rates     []float64 // GB/s, one a run
}

// kernelBenchmarks are the benchmarks of each package, of which those count that
// set their bytes. Decoding has a table of its own.
var kernelBenchmarks = []struct{ pkg, pattern string }{
	{"hadamard", "Predict|VarianceSum|Neighbours"}, {"fitsutil", "."}, {"calib", "."},
}

const kernelRuns = 3

// measureKernels runs the benchmarks of the kernels, one package after the
// other.
func measureKernels(ctx context.Context) ([]kernel, error) {
	all := []kernel{{pkg: "plain copy", name: "2 MiB, in cache"}, {pkg: "plain copy", name: "512 MiB, streamed"}}
	for range kernelRuns {
		for i, size := range []int{1 << 20, 256 << 20} {
			all[i].rates = append(all[i].rates, copyRate(size))
		}
	}
	for _, k := range kernelBenchmarks {
		fmt.Fprintf(os.Stderr, "kernels of %s ...\n", k.pkg)
		cmd := exec.CommandContext(ctx, "go", "test", "-run", "^$", "-bench", k.pattern, "-benchtime", "200ms", "-count", fmt.Sprint(kernelRuns), "./"+k.pkg)
		out, err := cmd.Output()
		if err != nil {
			return nil, fmt.Errorf("benchmarks of %s: %w\n%s", k.pkg, err, out)
		}
		all = append(all, parseKernels(k.pkg, out, benchmarkLine)...)
	}
	return all, nil
}

// copyRate is how many GB/s, in and out together, a copy of so many bytes moves.
func copyRate(size int) float64 {
	dst, src := make([]byte, size), bytes.Repeat([]byte{1}, size)
	r := testing.Benchmark(func(b *testing.B) {
		for b.Loop() {
			copy(dst, src)
		}
	})
	return 2 * float64(size) * float64(r.N) / r.T.Seconds() / 1e9
}

// benchmarkLine is "BenchmarkX/sub-2   123   456 ns/op   789.1 MB/s ...";
// benchmarkBusy the same with the rate in processor time, where it has one.
var (
	benchmarkLine = regexp.MustCompile(`^Benchmark(\S+?)(?:-\d+)?\s+\d+\s+[\d.]+ ns/op.*?\s([\d.]+) MB/s`)
	benchmarkBusy = regexp.MustCompile(`^Benchmark(\S+?)(?:-\d+)?\s+\d+\s+[\d.]+ ns/op.*?\s([\d.]+) MB/busy-s`)
)

// parseKernels collects the runs of each benchmark whose lines have the form, in
// order.
func parseKernels(pkg string, out []byte, form *regexp.Regexp) []kernel {
	var all []kernel
	scanner := bufio.NewScanner(bytes.NewReader(out))
	for scanner.Scan() {
		m := form.FindStringSubmatch(scanner.Text())
		if m == nil {
			continue
		}
		rate, err := strconv.ParseFloat(m[2], 64)
		if err != nil {
			continue
		}
		i := slices.IndexFunc(all, func(k kernel) bool { return k.name == m[1] })
		if i < 0 {
			i = len(all)
			all = append(all, kernel{pkg: pkg, name: m[1]})
		}
		all[i].rates = append(all[i].rates, rate/1e3)
	}
	return all
}

func (k kernel) median() float64 { return middle(k.rates) }

func writeKernels(b *strings.Builder, all []kernel) {
	fmt.Fprintf(b, `## Kernels

One core; medians of %d runs. Rates are of the bytes that a kernel reads and writes; the last column compares them with
the plain copy in cache of the same run.

| package | kernel | GB/s | of a copy |
| --- | --- | --- | --- |
`, kernelRuns)
	for _, k := range all {
		fmt.Fprintf(b, "| %s | %s | %.2f | %.2f |\n", k.pkg, k.name, k.median(), k.median()/all[0].median())
	}
}
