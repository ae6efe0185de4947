package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"mirrorloom/internal/child"
)

// program is what is measured, as `make build` leaves it.
const program = "bin/mirrorloom"

// given are the invented instrument, target and sky of both nights.
const given = "testdata/bench"

// night is a rehearsed night of 255 science frames of 1024 x 1024.
type night struct{ sequence, frames string }

// edit cuts a text out of a file.
type edit struct{ file, cut string }

// biasOnly leaves a night with bias frames as its only calibration and without
// overscan: all that the simple script knows.
var biasOnly = []edit{
	{"target.yaml", "all_off_every: 64\n"},
	{"target.yaml", "  dark: {count: 3, dwell_s: 90}\n"},
	{"target.yaml", "  flat: {count: 1, dwell_s: 5, lamp: halogen}\n"},
	{"profile.yaml", "overscan: [1025, 1056, 1, 1024], "},
}

func makeNight(ctx context.Context, dir string, edits []edit) (night, error) {
	n := night{filepath.Join(dir, "sequence"), filepath.Join(dir, "night")}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return n, err
	}
	for _, name := range []string{"profile.yaml", "target.yaml", "scene.yaml"} {
		text, err := os.ReadFile(filepath.Join(given, name))
		if err != nil {
			return n, err
		}
		edited := string(text)
		for _, e := range edits {
			if e.file != name {
				continue
			}
			if !strings.Contains(edited, e.cut) {
				return n, fmt.Errorf("%s/%s no longer holds %q", given, name, e.cut)
			}
			edited = strings.Replace(edited, e.cut, "", 1)
		}
		if err := os.WriteFile(filepath.Join(dir, name), []byte(edited), 0o644); err != nil {
			return n, err
		}
	}
	in := func(name string) string { return filepath.Join(dir, name) }
	if _, err := child.Run(ctx, program, "plan", in("target.yaml"), "--profile", in("profile.yaml"), "-o", n.sequence); err != nil {
		return n, err
	}
	_, err := child.Run(ctx, program, "rehearse", n.sequence, "--scene", in("scene.yaml"), "--seed", "1", "--perfect", "--no-truth", "-o", n.frames)
	return n, err
}
