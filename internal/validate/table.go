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

// writeTable writes the results as Markdown.
func writeTable(w io.Writer, done []result) error {
	var b strings.Builder
	b.WriteString(head)
	fmt.Fprintf(&b, "\nMachine: %d cores, %s, %s %s/%s.\n", runtime.NumCPU(), processor(), runtime.Version(), runtime.GOOS, runtime.GOARCH)
	for _, r := range done {
		fmt.Fprintf(&b, "\n## %s\n\n%s\n\n", r.name, r.about)
		b.WriteString("| what | required | measured | N | verdict |\n| --- | --- | --- | --- | --- |\n")
		for _, f := range r.findings {
			verdict := "holds"
			if !f.OK {
				verdict = "**FAILS**"
			}
			fmt.Fprintf(&b, "| %s | %s | %s | %d | %s |\n", f.What, f.Required, f.Measured, f.N, verdict)
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
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
