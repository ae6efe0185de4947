package main

import (
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"

	"mirrorloom/hadamard"
)

// decodeRuns is how often each side of a comparison runs, in turn.
const decodeRuns = 5

// decodeCase is a benchmark of hadamard beside a matrix product of the same
// code's size.
type decodeCase struct {
	what, name string
	v          int
	// least is the ratio to reach, by level; none where 0.
	least map[string]float64
	// One figure a run.
	rates, copies, ratios []float64
	level                 string
}

// levelNames are the benchmarks' names of the levels.
var levelNames = map[string]string{"go": "pure Go", "avx2": "AVX2", "avx512": "AVX-512"}

func decodeCases() []decodeCase {
	var all []decodeCase
	add := func(what, name string, v int, least map[string]float64) {
		for _, level := range []string{"go", "avx2", "avx512"} {
			all = append(all, decodeCase{what: what, name: name + "/" + level, v: v, level: level, least: least})
		}
	}
	least := map[int]map[string]float64{511: {"avx2": 7.5, "avx512": 15}, 4095: {"avx2": 30, "avx512": 60}}
	for _, v := range []int{63, 127, 255, 511, 1023, 2047, 4095} {
		add(fmt.Sprintf("m-sequence %d", v), fmt.Sprintf("Decode/m-sequence/%d", v), v, least[v])
	}
	add("m-sequence 511, streamed", "Streamed", 511, map[string]float64{"avx2": 2, "avx512": 4})
	for _, c := range []struct {
		family hadamard.Family
		v      int
	}{{hadamard.Legendre, 499}, {hadamard.TwinPrime, 899}, {hadamard.Singer, 820}} {
		var least map[string]float64
		if c.v == 499 {
			least = map[string]float64{"avx2": 0.125, "avx512": 0.25}
		}
		add(fmt.Sprintf("%s %d", c.family, c.v), fmt.Sprintf("Decode/%s/%d", c.family, c.v), c.v, least)
	}
	return all
}

// decoding is all that is measured of decoding.
type decoding struct {
	gemm    string
	tried   []string
	cases   []decodeCase
	growths []kernel
}

func decodingTable(ctx context.Context, s *session) (string, error) {
	d, err := measureDecoding(ctx, s.dir)
	if err != nil {
		return "", err
	}
	return d.table(), nil
}

// measureDecoding runs each benchmark of decoding, a copy of the same block and
// a matrix product in turn.
func measureDecoding(ctx context.Context, scratch string) (*decoding, error) {
	binary := filepath.Join(scratch, "hadamard.test")
	if out, err := exec.CommandContext(ctx, "go", "test", "-c", "-o", binary, "./hadamard").CombinedOutput(); err != nil {
		return nil, fmt.Errorf("building hadamard's benchmarks: %w\n%s", err, out)
	}
	g, tried, err := bestGEMM(ctx)
	if err != nil {
		return nil, err
	}
	defer g.stop()
	d := &decoding{gemm: g.kernel, tried: tried}
	for _, c := range decodeCases() {
		fmt.Fprintf(os.Stderr, "%s, %s ...\n", c.what, levelNames[c.level])
		for range decodeRuns {
			if err := c.measure(ctx, binary, g); err != nil {
				return nil, err
			}
		}
		if len(c.rates) > 0 {
			d.cases = append(d.cases, c)
		}
	}
	pixels, err := runBenchmark(ctx, binary, "Pixels", benchmarkBusy, decodeRuns)
	if err != nil {
		return nil, err
	}
	workers, err := runBenchmark(ctx, binary, "Workers", benchmarkLine, decodeRuns)
	d.growths = append(pixels, workers...)
	return d, err
}

// measure adds a run, unless this processor has not the level.
func (c *decodeCase) measure(ctx context.Context, binary string, g *gemm) error {
	ours, err := runBenchmark(ctx, binary, c.name, benchmarkBusy, 1)
	if err != nil || len(ours) == 0 {
		return err
	}
	name := fmt.Sprintf("Copy/%d", c.v)
	if strings.HasPrefix(c.name, "Streamed") {
		name = "CopyStreamed"
	}
	plain, err := runBenchmark(ctx, binary, name, benchmarkBusy, 1)
	if err != nil {
		return err
	}
	if len(plain) != 1 {
		return fmt.Errorf("hadamard has no benchmark %s", name)
	}
	product, err := g.rate(c.v)
	if err != nil {
		return err
	}
	c.rates = append(c.rates, ours[0].rates[0])
	c.copies = append(c.copies, ours[0].rates[0]/plain[0].rates[0])
	c.ratios = append(c.ratios, ours[0].rates[0]/product)
	return nil
}

// runBenchmark runs a benchmark of a test binary, with those below it, and reads
// the lines of a form.
func runBenchmark(ctx context.Context, binary, name string, form *regexp.Regexp, runs int) ([]kernel, error) {
	pattern := "^Benchmark" + strings.ReplaceAll(name, "/", "$/^") + "$"
	out, err := exec.CommandContext(ctx, binary, "-test.run", "^$", "-test.bench", pattern, "-test.benchtime", "100ms", "-test.count", fmt.Sprint(runs)).Output()
	if err != nil {
		return nil, fmt.Errorf("benchmark %s: %w\n%s", name, err, out)
	}
	return parseKernels("hadamard", out, form), nil
}

// middle is the median.
func middle(x []float64) float64 {
	sorted := slices.Sorted(slices.Values(x))
	return sorted[len(sorted)/2]
}

// table is the section's text.
func (d *decoding) table() string {
	var b strings.Builder
	fmt.Fprintf(&b, `One core. Bytes are those in and out. A block has %d pixels, as in `+"`reduce`"+`; the streamed one has 64 Ki, 268 MB in and out.
Rates are in processor time, so that what else runs on the machine counts less. Each figure is a median of %d runs, in each
of which the kernel, a plain copy of the block and the matrix product of numpy run in turn; ratios are of the same run
(range over the runs). The product is OpenBLAS's in float32, on one thread, of up to 16384 pixels, by its fastest kernels
here, %s. Those tried, at v = 511: %s.

| code | kernels | GB/s | of a copy | of the product | to reach | verdict |
| --- | --- | --- | --- | --- | --- | --- |
`, 272, decodeRuns, d.gemm, strings.Join(d.tried, ", "))
	for _, c := range d.cases {
		reach, verdict := "", ""
		if least := c.least[c.level]; least > 0 {
			reach, verdict = fmt.Sprintf(">= %g", least), judged(middle(c.ratios) >= least)
		}
		fmt.Fprintf(&b, "| %s | %s | %.2f | %.2f | %.2f (%.2f to %.2f) | %s | %s |\n", c.what, levelNames[c.level],
			middle(c.rates), middle(c.copies), middle(c.ratios), slices.Min(c.ratios), slices.Max(c.ratios), reach, verdict)
	}
	fmt.Fprintf(&b, `
Growth with pixels, and with workers (these by the clock), v = 511, %s. Blocks whose rows are a power
of two apart fall into the same few places of a cache; 272 floats are 17 cache lines.

| what | GB/s |
| --- | --- |
`, hadamard.CPULevel())
	for _, k := range d.growths {
		fmt.Fprintf(&b, "| %s | %.2f |\n", strings.ToLower(strings.Replace(k.name, "/", " ", 1)), k.median())
	}
	return b.String()
}
