package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"mirrorloom/internal/child"
)

// growthCase is a small night that differs in one respect from others.
type growthCase struct {
	group, what   string
	v, rows, mass int // mass: mirrors of half the width in an element
	workers       int
}

func growthCases() []growthCase {
	var all []growthCase
	for _, c := range []struct{ v, mass int }{{63, 16}, {127, 8}, {255, 4}, {511, 2}, {1023, 1}} {
		all = append(all, growthCase{"frames", fmt.Sprintf("%d frames of 1024 x 128", c.v), c.v, 128, c.mass, 2})
	}
	for _, rows := range []int{64, 128, 256, 512, 1024} {
		all = append(all, growthCase{"pixels", fmt.Sprintf("127 frames of 1024 x %d", rows), 127, rows, 8, 2})
	}
	for _, workers := range []int{1, 2, 4} {
		all = append(all, growthCase{"workers", fmt.Sprintf("%d, 255 frames of 1024 x 256", workers), 255, 256, 4, workers})
	}
	return all
}

func (c growthCase) plan() nightPlan {
	edits := append(narrowMirrors(), coded(c.v, c.mass))
	return nightPlan{fmt.Sprintf("growth-%d-%d", c.v, c.rows), append(edits, detector(1024, c.rows)...), perfect}
}

// growth lists whole reductions of small nights.
func growth(ctx context.Context, s *session) (string, error) {
	var b strings.Builder
	fmt.Fprintf(&b, `Whole reductions of small nights in the page cache, products synced to the disk; throughput and repairs by the dark
columns on, no lamp frames, `+"`--memory %s`"+`. Elements cover the same field whatever the code. %d runs of each. Bytes are those of
frames and products; what a run takes whatever its size (masks, samples for the audit, the report) weighs on the smallest.

| of | night | GB in, out | time | processor | peak | ns per byte |
| --- | --- | --- | --- | --- | --- | --- |
`, workersMemory, s.runs)
	recipe, err := recipeFile(s.dir, withoutLamps)
	if err != nil {
		return "", err
	}
	for _, c := range growthCases() {
		n, err := s.nights.make(ctx, c.plan())
		if err != nil {
			return "", err
		}
		frames, in, err := framesOf(n)
		if err != nil {
			return "", err
		}
		if err := warm(frames); err != nil {
			return "", err
		}
		fmt.Fprintf(os.Stderr, "%s: %s ...\n", c.group, c.what)
		run := filepath.Join(s.dir, "run")
		var used []child.Usage
		for range s.runs {
			u, err := child.Run(ctx, program, "reduce", n.frames, "--sequence", n.sequence, "--recipe", recipe, "--memory", workersMemory,
				"--workers", fmt.Sprint(c.workers), "-o", run, "--replace")
			if err != nil {
				return "", err
			}
			used = append(used, u)
		}
		out, err := folderBytes(run)
		if err != nil {
			return "", err
		}
		time := median(used, wall)
		fmt.Fprintf(&b, "| %s | %s | %.3f, %.3f | %.2f s | %.2f s | %d MiB | %.2f |\n", c.group, c.what, float64(in)/1e9, float64(out)/1e9,
			time.Seconds(), median(used, busy).Seconds(), median(used, peak)>>20, float64(time.Nanoseconds())/float64(in+out))
	}
	return b.String(), nil
}
