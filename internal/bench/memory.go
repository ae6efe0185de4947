package main

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"

	"golang.org/x/sys/unix"

	"mirrorloom/internal/child"
)

// withoutLamps is the default recipe for a night without coded lamp frames and arcs:
// throughput and repairs by the dark columns are on.
const withoutLamps = "flat: {use: off}\narc: {use: off}\n"

// largePlan is a night of v frames of 2048 x 2048 with a grid of 256 wavelengths. Its
// elements cover the same field whatever v is.
func largePlan(v, elementMirrors int) nightPlan {
	edits := []edit{
		{"profile.yaml", "columns: 500", "columns: 1000"},
		{"profile.yaml", "first_nm: 540.125, step_nm: 0.25, count: 480", "first_nm: 568.125, step_nm: 0.25, count: 256"},
		// 5 rows from end to end, as on the smaller detector.
		{"profile.yaml", "trace_tilt: 0.004", "trace_tilt: 0.002"},
		coded(v, elementMirrors),
	}
	return nightPlan{fmt.Sprintf("large-%d", v), append(edits, detector(2048, 2048)...), perfect}
}

// largeRun is a reduction of a large night.
type largeRun struct {
	v       int
	in, out int64
	used    child.Usage
}

const (
	largeMemory = "512MiB"
	mostMemory  = 512 << 20
	mostGrowth  = 1.15
	// largeRoom is the disk that the section needs: frames and cube of 1023 frames, and of 255.
	largeRoom = 24 << 30
)

// largeNight measures the peak of the memory, and time by the bytes moved.
func largeNight(ctx context.Context, s *session) (string, error) {
	if err := roomFor(largeRoom, s.dir); err != nil {
		return "", err
	}
	few, err := reduceLarge(ctx, s, largePlan(255, 4), 255)
	if err != nil {
		return "", err
	}
	many, err := reduceLarge(ctx, s, largePlan(1023, 1), 1023)
	if err != nil {
		return "", err
	}
	var b strings.Builder
	fmt.Fprintf(&b, `Frames of 2048 x 2048, a grid of 256 wavelengths, `+"`--memory %s`"+`, throughput, repairs and error scale by dark columns
on, no lamp frames. The peak is the largest resident memory of the process (ru_maxrss). Bytes are those of the frames and
of the products. One run each.

| frames | GB in, out | time | processor | ns per byte | peak |
| --- | --- | --- | --- | --- | --- |
`, largeMemory)
	for _, r := range []largeRun{few, many} {
		fmt.Fprintf(&b, "| %d | %.2f, %.2f | %.1f s | %.1f s | %.3f | %.1f MiB |\n", r.v, float64(r.in)/1e9, float64(r.out)/1e9,
			r.used.Wall.Seconds(), r.used.CPU.Seconds(), r.perByte(), float64(r.used.PeakBytes)/(1<<20))
	}
	growth := many.perByte() / few.perByte()
	aside := growth / (math.Log(float64(many.v)) / math.Log(float64(few.v)))
	fmt.Fprintf(&b, `
| what | measured | to reach | verdict |
| --- | --- | --- | --- |
| peak memory, 1023 frames | %.1f MiB | <= %d MiB | %s |
| time per byte, 1023 frames over 255 | %.2f; %.2f with log v set aside | <= %g with log v set aside | %s |
`, float64(many.used.PeakBytes)/(1<<20), mostMemory>>20, judged(many.used.PeakBytes <= mostMemory),
		growth, aside, mostGrowth, judged(aside <= mostGrowth))
	return b.String(), nil
}

func reduceLarge(ctx context.Context, s *session, p nightPlan, v int) (largeRun, error) {
	r := largeRun{v: v}
	n, err := s.nights.make(ctx, p)
	if err != nil {
		return r, err
	}
	frames, in, err := framesOf(n)
	if err != nil {
		return r, err
	}
	if _, err := cool(frames); err != nil { // 8.6 GB may fit the page cache or not: on disk, both
		return r, err
	}
	recipe, err := recipeFile(s.dir, withoutLamps)
	if err != nil {
		return r, err
	}
	run := filepath.Join(s.dir, "run")
	fmt.Fprintf(os.Stderr, "reducing %d frames ...\n", len(frames))
	r.used, err = child.Run(ctx, program, "reduce", n.frames, "--sequence", n.sequence, "--recipe", recipe, "--memory", largeMemory, "-o", run)
	if err != nil {
		return r, err
	}
	r.in = in
	if r.out, err = folderBytes(run); err != nil {
		return r, err
	}
	if err := os.RemoveAll(run); err != nil {
		return r, err
	}
	return r, s.nights.discard(n)
}

func (r largeRun) perByte() float64 {
	return float64(r.used.Wall.Nanoseconds()) / float64(r.in+r.out)
}

// roomFor fails where a folder's disk has fewer bytes free.
func roomFor(bytes uint64, dir string) error {
	var s unix.Statfs_t
	if err := unix.Statfs(dir, &s); err != nil {
		return fmt.Errorf("%s: %w", dir, err)
	}
	if free := s.Bavail * uint64(s.Bsize); free < bytes {
		return fmt.Errorf("%s has %.0f GB free; this section needs %.0f GB: set TMPDIR to a larger disk, or leave it out with -only", dir, float64(free)/1e9, float64(bytes)/1e9)
	}
	return nil
}
