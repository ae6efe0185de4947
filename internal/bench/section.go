package main

import (
	"context"
	"fmt"
	"os"
	"strings"
)

// section is a part of BENCHMARKS.md that can be measured by itself.
type section struct {
	name string
	// run measures and gives the text below the heading.
	run func(ctx context.Context, s *session) (string, error)
}

// sections in the order of the file. What measures in this very process and takes much
// memory comes last: see package child.
func sections() []section {
	return []section{
		{"Beside numpy", besideNumpy},
		{"Beside numpy, all steps", allSteps},
		{"Beside numpy, 1023 frames", longNight},
		{"Floor", floor},
		{"Memory", largeNight},
		{"Workers", workers},
		{"Viewing", viewing},
		{"Growth", growth},
		{"Decoding", decodingTable},
		{"Kernels", kernelTable},
	}
}

// session is a run of bench.
type session struct {
	// dir is an empty folder of the section that runs.
	dir    string
	nights *nights
	runs   int
}

// kernelTable runs the benchmarks of the packages.
func kernelTable(ctx context.Context, _ *session) (string, error) {
	all, err := measureKernels(ctx)
	if err != nil {
		return "", err
	}
	var b strings.Builder
	writeKernels(&b, all)
	_, text, _ := strings.Cut(b.String(), "\n\n") // without its heading
	return text, nil
}

// readSections reads what a file that writeSections has written says in each section;
// nothing if there is none.
func readSections(path string) map[string]string {
	all := map[string]string{}
	text, err := os.ReadFile(path)
	if err != nil {
		return all
	}
	parts := strings.Split(string(text), "\n## ")
	for _, part := range parts[1:] {
		name, body, _ := strings.Cut(part, "\n")
		all[name] = strings.Trim(body, "\n") + "\n"
	}
	return all
}

// writeSections writes the file of what was measured, now or before.
func writeSections(m machine, all map[string]string) string {
	var b strings.Builder
	b.WriteString(`# Benchmarks

Written by ` + "`make bench`" + `; ` + "`go run ./internal/bench -only NAME`" + ` measures the sections whose names contain NAME and
leaves the others. Figures are ratios of what ran in turn on one machine, medians over the runs. Each section names the
load that the machine had before it.

`)
	m.write(&b)
	for _, s := range sections() {
		if text := all[s.name]; text != "" {
			fmt.Fprintf(&b, "## %s\n\n%s\n", s.name, text)
		}
	}
	return strings.TrimRight(b.String(), "\n") + "\n"
}

// load is the machine's mean number of running processes over the last minute.
func load() string {
	text, err := os.ReadFile("/proc/loadavg")
	if err != nil {
		return "unknown"
	}
	first, _, _ := strings.Cut(string(text), " ")
	return first
}

// judged is a row's last cell.
func judged(reached bool) string {
	if reached {
		return "reached"
	}
	return "**not reached**"
}
