package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"mirrorloom/internal/child"
)

// floorCommand makes bench the program that only moves bytes:
//
//	bench floor BYTES OUT FRAME...
//
// reads the frames to their ends, one after the other, then writes so many bytes to OUT
// and syncs them.
const floorCommand = "floor"

const floorBlock = 1 << 20

func runFloor(args []string) error {
	if len(args) < 2 {
		return errors.New("floor wants BYTES OUT FRAME")
	}
	bytes, err := strconv.ParseInt(args[0], 10, 64)
	if err != nil {
		return err
	}
	block := make([]byte, floorBlock)
	for _, path := range args[2:] {
		err := eachFile(path, func(f *os.File) error {
			for {
				switch _, err := f.Read(block); {
				case errors.Is(err, io.EOF):
					return nil
				case err != nil:
					return err
				}
			}
		})
		if err != nil {
			return err
		}
	}
	out, err := os.Create(args[1])
	if err != nil {
		return err
	}
	for done := int64(0); done < bytes; {
		n, err := out.Write(block[:min(floorBlock, bytes-done)]) // of the last frame
		if err != nil {
			return errors.Join(err, out.Close())
		}
		done += int64(n)
	}
	return errors.Join(out.Sync(), out.Close())
}

// floorCase is a night that has nothing to repair.
type floorCase struct {
	what, recipe string
	night        nightPlan
}

// mostOverFloor is the time that reduce may take, in that of moving the bytes.
const mostOverFloor = 1.5

// floor compares whole reductions with moving their bytes, frames on disk and frames in
// the page cache.
func floor(ctx context.Context, s *session) (string, error) {
	var b strings.Builder
	fmt.Fprintf(&b, `The floor is a program that reads the same frame files one after the other, then writes as many bytes as the run's
folder holds and syncs them: in the same folder, in turn with the reduction. "On disk": before each run of either side
the frames are taken out of the page cache (posix_fadvise, mincore says what is left); "cached": they are read before.
A host's cache, if this is a virtual machine, is beyond reach. %d runs of each side. Nights without faults.

| night | recipe | frames | GB in, out | reduction | floor | time over the floor's | to reach | verdict |
| --- | --- | --- | --- | --- | --- | --- | --- | --- |
`, s.runs)
	for _, c := range []floorCase{
		{"255 frames of 1024 x 1024 and 18 more", "nominal", simple},
		{"255 frames of 1024 x 1024, coded lamp frames, arcs: 568 files", "default", calibrated("faultless")},
	} {
		n, err := s.nights.make(ctx, c.night)
		if err != nil {
			return "", err
		}
		for _, cached := range []bool{false, true} {
			row, err := c.row(ctx, s, n, cached)
			if err != nil {
				return "", err
			}
			b.WriteString(row)
		}
	}
	return b.String(), nil
}

func (c floorCase) row(ctx context.Context, s *session, n night, cached bool) (string, error) {
	frames, in, err := framesOf(n)
	if err != nil {
		return "", err
	}
	state := "cached"
	prepare := func() error { return warm(frames) }
	if !cached {
		state = "on disk"
		prepare = func() error {
			left, err := cool(frames)
			if left > 0.01 {
				state = fmt.Sprintf("%.0f %% still cached", 100*left)
			}
			return err
		}
	}
	self, err := os.Executable()
	if err != nil {
		return "", err
	}
	run, moved := filepath.Join(s.dir, "run"), filepath.Join(s.dir, "moved")
	var ours, least []child.Usage
	var out int64
	for range s.runs {
		if err := prepare(); err != nil {
			return "", err
		}
		u, err := child.Run(ctx, program, "reduce", n.frames, "--sequence", n.sequence, "--recipe", c.recipe, "--memory", "512MiB", "-o", run, "--replace")
		if err != nil {
			return "", err
		}
		ours = append(ours, u)
		if out, err = folderBytes(run); err != nil {
			return "", err
		}
		if err := prepare(); err != nil {
			return "", err
		}
		if u, err = child.Run(ctx, self, append([]string{floorCommand, fmt.Sprint(out), moved}, frames...)...); err != nil {
			return "", err
		}
		least = append(least, u)
		if err := errors.Join(os.Remove(moved), os.RemoveAll(run)); err != nil {
			return "", err
		}
	}
	return fmt.Sprintf("| %s | %s | %s | %.2f, %.2f | %.1f s, processor %.1f s | %.1f s | %s | <= %g | %s |\n", c.what, c.recipe, state,
		float64(in)/1e9, float64(out)/1e9, median(ours, wall).Seconds(), median(ours, busy).Seconds(), median(least, wall).Seconds(),
		ratio(ours, least, wall), mostOverFloor, judged(over(ours, least, wall) <= mostOverFloor)), nil
}

// folderBytes is the size of all files of a folder.
func folderBytes(dir string) (int64, error) {
	total := int64(0)
	err := filepath.WalkDir(dir, func(_ string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		info, err := d.Info()
		if err == nil {
			total += info.Size()
		}
		return err
	})
	return total, err
}
