package main

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"runtime"
	"strings"
)

const head = `# Validation

Measured by ` + "`make validate`" + `, which writes this file; all seeds are fixed. N is the
number of independent samples: a decoded pixel is one, and of resampled voxels,
whose neighbours share pixels, every second. A figure fails beyond what is
required or 5 standard errors, whichever is larger; where the latter is, the table
says so.
`

// writeTable writes the sections of the checks, by name, in the order of checks.
func writeTable(w io.Writer, sections map[string]string) error {
	var b strings.Builder
	b.WriteString(head)
	fmt.Fprintf(&b, "\nMachine: %d cores, %s, %s %s/%s.\n", runtime.NumCPU(), processor(), runtime.Version(), runtime.GOOS, runtime.GOARCH)
	for _, c := range checks() {
		b.WriteString(sections[c.name])
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// section is what the table says of a check.
func (r result) section() string {
	var b strings.Builder
	fmt.Fprintf(&b, "\n## %s\n\n%s\n\n", r.name, r.about)
	b.WriteString("| what | required | measured | N | verdict |\n| --- | --- | --- | --- | --- |\n")
	for _, f := range r.findings {
		verdict := "holds"
		if !f.OK {
			verdict = "**FAILS**"
		}
		fmt.Fprintf(&b, "| %s | %s | %s | %d | %s |\n", f.What, f.Required, f.Measured, f.N, verdict)
	}
	return b.String()
}

// readSections reads what a file that writeTable has written says of each check; nothing
// if there is none.
func readSections(path string) map[string]string {
	sections := map[string]string{}
	text, err := os.ReadFile(path)
	if err != nil {
		return sections
	}
	parts := strings.Split(string(text), "\n## ")
	for _, part := range parts[1:] {
		name, _, _ := strings.Cut(part, "\n")
		sections[name] = "\n## " + strings.TrimRight(part, "\n") + "\n"
	}
	return sections
}

// processor is the model's name where the system tells it.
func processor() string {
	f, err := os.Open("/proc/cpuinfo")
	if err != nil {
		return "unknown processor"
	}
	defer f.Close() // only read from
	lines := bufio.NewScanner(f)
	for lines.Scan() {
		if key, value, ok := strings.Cut(lines.Text(), ":"); ok && strings.TrimSpace(key) == "model name" {
			return strings.TrimSpace(value)
		}
	}
	return "unknown processor"
}
