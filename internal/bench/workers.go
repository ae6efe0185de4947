package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"

	"mirrorloom/internal/child"
)

const (
	tmpfs         = "/dev/shm"
	leastTwofold  = 1.8
	workersMemory = "512MiB"
)

// workers compares one worker with two where no disk takes part.
func workers(ctx context.Context, s *session) (string, error) {
	out, err := os.MkdirTemp(tmpfs, "mirrorloom-bench-")
	if err != nil {
		return "", fmt.Errorf("this section writes to a tmpfs: %w", err)
	}
	defer os.RemoveAll(out)
	var b strings.Builder
	fmt.Fprintf(&b, `Frames in the page cache, products on a tmpfs (%s): no disk takes part. %d runs of each, in turn, on %d cores. With one
worker the system, the reader of the next strip and the garbage collector still have the other core.

| night | recipe | one worker | two | time of one over two | to reach | verdict |
| --- | --- | --- | --- | --- | --- | --- |
`, tmpfs, s.runs, runtime.NumCPU())
	for _, c := range []floorCase{
		{"255 frames of 1024 x 1024 and 18 more", "nominal", simple},
		{"255 frames of 1024 x 1024, coded lamp frames, arcs: 568 files", "default", calibrated("faultless")},
	} {
		n, err := s.nights.make(ctx, c.night)
		if err != nil {
			return "", err
		}
		frames, _, err := framesOf(n)
		if err != nil {
			return "", err
		}
		used := map[int][]child.Usage{}
		for range s.runs {
			for _, workers := range []int{1, 2} {
				if err := warm(frames); err != nil {
					return "", err
				}
				u, err := child.Run(ctx, program, "reduce", n.frames, "--sequence", n.sequence, "--recipe", c.recipe, "--memory", workersMemory,
					"--workers", fmt.Sprint(workers), "-o", filepath.Join(out, "run"), "--replace")
				if err != nil {
					return "", err
				}
				used[workers] = append(used[workers], u)
			}
		}
		fmt.Fprintf(&b, "| %s | %s | %s | %s | %s | >= %g | %s |\n", c.what, c.recipe, figures(used[1]), figures(used[2]),
			ratio(used[1], used[2], wall), leastTwofold, judged(over(used[1], used[2], wall) >= leastTwofold))
	}
	return b.String(), nil
}
