package main

import (
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"mirrorloom/internal/child"
)

// program is what is measured, as `make build` leaves it.
const program = "bin/mirrorloom"

// given are the invented instrument, target and sky of all nights.
const given = "testdata/bench"

// night is a rehearsed night on disk.
type night struct{ sequence, frames string }

// nightPlan says how a night differs from the files in testdata/bench.
type nightPlan struct {
	name  string
	edits []edit
	// options of rehearse.
	options []string
}

// edit replaces a text of a file.
type edit struct{ file, old, new string }

// perfect is an instrument as its profile says, without faults.
var perfect = []string{"--perfect", "--no-truth"}

// nights makes nights in a folder and keeps them there: two sections may share one.
type nights struct {
	root string
	// keep leaves them for another run of bench.
	keep bool
}

// wholeFile is in the folder of a night that is complete.
const wholeFile = "whole"

// make rehearses a night, unless it is there.
func (n *nights) make(ctx context.Context, p nightPlan) (night, error) {
	texts, err := p.texts()
	if err != nil {
		return night{}, err
	}
	dir := n.folder(p, texts)
	in := func(name string) string { return filepath.Join(dir, name) }
	made := night{in("sequence"), in("night")}
	switch _, err := os.Stat(in(wholeFile)); {
	case err == nil:
		return made, nil
	case !errors.Is(err, fs.ErrNotExist):
		return made, err
	}
	fmt.Fprintf(os.Stderr, "making the night %q ...\n", p.name)
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return made, err
	}
	for name, text := range texts {
		if err := os.WriteFile(in(name), []byte(text), 0o644); err != nil {
			return made, err
		}
	}
	if _, err := child.Run(ctx, program, "plan", in("target.yaml"), "--profile", in("profile.yaml"), "-o", made.sequence, "--replace"); err != nil {
		return made, err
	}
	args := append([]string{"rehearse", made.sequence, "--scene", in("scene.yaml"), "--seed", "1", "-o", made.frames, "--replace"}, p.options...)
	if _, err := child.Run(ctx, program, args...); err != nil {
		return made, err
	}
	return made, os.WriteFile(in(wholeFile), nil, 0o644)
}

// folder of a night: one of other files or faults has another.
func (n *nights) folder(p nightPlan, texts map[string]string) string {
	key := sha256.Sum256(fmt.Appendf(nil, "%q %q", texts, p.options))
	return filepath.Join(n.root, fmt.Sprintf("%s-%x", p.name, key[:4]))
}

// discard makes room for other nights, unless they are to be kept.
func (n *nights) discard(made night) error {
	if n.keep {
		return nil
	}
	return os.RemoveAll(filepath.Dir(made.frames))
}

// texts are the files of a night.
func (p nightPlan) texts() (map[string]string, error) {
	texts := map[string]string{}
	for _, name := range []string{"profile.yaml", "target.yaml", "scene.yaml"} {
		text, err := os.ReadFile(filepath.Join(given, name))
		if err != nil {
			return nil, err
		}
		texts[name] = string(text)
	}
	for _, e := range p.edits {
		if !strings.Contains(texts[e.file], e.old) {
			return nil, fmt.Errorf("%s/%s no longer holds %q", given, e.file, e.old)
		}
		texts[e.file] = strings.Replace(texts[e.file], e.old, e.new, 1)
	}
	return texts, nil
}

// biasOnly leaves bias frames as the only calibration, and no overscan: all that the
// simplest script knows.
func biasOnly() []edit {
	return []edit{
		{"target.yaml", "all_off_every: 64\n", ""},
		{"target.yaml", "  dark: {count: 3, dwell_s: 90}\n", ""},
		{"target.yaml", oneLamp, ""},
		{"profile.yaml", "overscan: [1025, 1056, 1, 1024], ", ""},
	}
}

const (
	oneLamp = "  flat: {count: 1, dwell_s: 5, lamp: halogen}\n"
	oneCode = "v: 255, dark: 16, element_mirrors: 2"
)

// allLamps adds a coded cycle of lamp frames and arcs through every so many elements.
func allLamps(every int) edit {
	return edit{"target.yaml", oneLamp, fmt.Sprintf(`  flat: {count: 3, dwell_s: 5, lamp: halogen, coded_cycles: 1}
  arc: {count: 1, dwell_s: 8, lamp: HeHgNe, every: %d}
`, every)}
}

// coded takes another code, with as many dark columns as are the default or more.
func coded(v, elementMirrors int) edit {
	return edit{"target.yaml", oneCode, fmt.Sprintf("v: %d, dark: %d, element_mirrors: %d", v, max(16, (v+1)/8), elementMirrors)}
}

// narrowMirrors puts as many mirrors of half the width side by side, so that a code of
// four times the elements covers the same field.
func narrowMirrors() []edit {
	return []edit{{"profile.yaml", "columns: 500", "columns: 1000"}, {"profile.yaml", "u_step_px: 0.98", "u_step_px: 0.49"}}
}

// detector has other columns and rows, both even, and as many mirror rows as fit.
func detector(columns, rows int) []edit {
	return []edit{
		{"profile.yaml", "  columns: 1024\n  rows: 1024\n", fmt.Sprintf("  columns: %d\n  rows: %d\n", columns, rows)},
		{"profile.yaml", "data: [1, 1024, 1, 1024], overscan: [1025, 1056, 1, 1024]",
			fmt.Sprintf("data: [1, %d, 1, %d], overscan: [%d, %d, 1, %d]", columns, rows, columns+1, columns+32, rows)},
		{"profile.yaml", "  rows: 980\n", fmt.Sprintf("  rows: %d\n", (rows-24)*49/100*2)},
		{"profile.yaml", "x_center_px: 511.5", fmt.Sprintf("x_center_px: %d.5", columns/2-1)},
		{"profile.yaml", "y_center_px: 511.5", fmt.Sprintf("y_center_px: %d.5", rows/2-1)},
	}
}
