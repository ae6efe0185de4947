package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// every night that a section makes.
func allNights() []nightPlan {
	all := []nightPlan{
		{"bias-only", biasOnly(), perfect}, simple, calibrated("faultless"), everything().night, longPlan(), largePlan(255, 4), largePlan(1023, 1),
	}
	for _, c := range growthCases() {
		all = append(all, c.plan())
	}
	return all
}

// TestNightsAreMade holds the edits against the files in testdata/bench.
func TestNightsAreMade(t *testing.T) {
	t.Chdir("../..")
	n := nights{root: t.TempDir()}
	texts := map[string]string{}
	for _, p := range allNights() {
		files, err := p.texts()
		if err != nil {
			t.Errorf("%s: %v", p.name, err)
			continue
		}
		all := strings.Join([]string{files["profile.yaml"], files["target.yaml"], files["scene.yaml"], strings.Join(p.options, " ")}, "\n")
		// Nights of the same files and faults share a folder; others never.
		if other, ok := texts[n.folder(p, files)]; ok && other != all {
			t.Errorf("%s shares its folder with another night", p.name)
		}
		texts[n.folder(p, files)] = all
	}
}

func TestSectionsAreKept(t *testing.T) {
	measured := map[string]string{"Floor": "| a |\n| --- |\n| 1 |\n\nLoad before: 0.1.\n", "Kernels": "text\n\n| b |\n"}
	path := filepath.Join(t.TempDir(), "BENCHMARKS.md")
	first := writeSections(machine{}, measured)
	if err := os.WriteFile(path, []byte(first), 0o644); err != nil {
		t.Fatal(err)
	}
	if again := writeSections(machine{}, readSections(path)); again != first {
		t.Errorf("what was measured before is changed:\n%s\nwas\n%s", again, first)
	}
	if strings.Index(first, "## Floor") > strings.Index(first, "## Kernels") {
		t.Error("sections are not in their order")
	}
}

// TestFloorMovesBytes: all frames are read, and as many bytes written as asked for, more
// or less than a block.
func TestFloorMovesBytes(t *testing.T) {
	dir := t.TempDir()
	frame, out := filepath.Join(dir, "f.fits"), filepath.Join(dir, "out")
	if err := os.WriteFile(frame, bytes.Repeat([]byte{7}, floorBlock+5), 0o644); err != nil {
		t.Fatal(err)
	}
	for size, text := range map[int64]string{0: "0", 17: "17", floorBlock: "1048576", 3*floorBlock + 1: "3145729"} {
		if err := runFloor([]string{text, out, frame}); err != nil {
			t.Fatal(err)
		}
		if info, err := os.Stat(out); err != nil || info.Size() != size {
			t.Errorf("%d bytes were asked for: %v, %v", size, info, err)
		}
	}
	if err := runFloor([]string{"1", out, filepath.Join(dir, "none")}); err == nil {
		t.Error("a missing frame is no error")
	}
}

// TestCoolAndWarm: pages are counted as the system does.
func TestCoolAndWarm(t *testing.T) {
	path := filepath.Join(t.TempDir(), "f.fits")
	if err := os.WriteFile(path, make([]byte, 1<<20), 0o644); err != nil {
		t.Fatal(err)
	}
	if err := warm([]string{path}); err != nil {
		t.Fatal(err)
	}
	count := func() (inside int) {
		if err := eachFile(path, func(f *os.File) (err error) {
			_, inside, err = resident(f)
			return err
		}); err != nil {
			t.Fatal(err)
		}
		return inside
	}
	if got := count(); got != 256 {
		t.Errorf("%d of 256 pages of a file just written are in the page cache", got)
	}
	left, err := cool([]string{path})
	if err != nil {
		t.Fatal(err)
	}
	if inside := count(); float64(inside)/256 > left {
		t.Errorf("%d of 256 pages are left, not a part of %g", inside, left)
	}
}
