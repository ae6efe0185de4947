package trial

import (
	"bufio"
	"context"
	"encoding/binary"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"

	"mirrorloom/calib"
	"mirrorloom/internal/outside"
)

// sigma is the noise of a sample of pixel i without its ray, whose light is taken
// from the clean sample.
func (s *Struck) sigma(i int, clean float32) float64 {
	return math.Sqrt(float64(s.Noise.Read[i]) + s.Noise.Photon*max(0, float64(clean)))
}

// Ours are the samples that a rule finds, [frame][pixel].
func (s *Struck) Ours(rule calib.EdgeRule) ([][]bool, error) {
	var all [][]bool
	for _, frame := range s.Frames {
		hits, err := rule.Find(frame, s.Width, s.Noise, s.Flags)
		if err != nil {
			return nil, err
		}
		found := make([]bool, len(frame))
		for _, h := range hits {
			found[h.Pixel] = true
		}
		all = append(all, found)
	}
	return all, nil
}

// Theirs are the samples that astroscrappy finds by the same rule, and its version.
// Its noise model knows one read noise alone, that of the first pixel. Files are
// made in dir.
func (s *Struck) Theirs(ctx context.Context, rule calib.EdgeRule, dir string) (found [][]bool, version string, err error) {
	frames, flags, masks := filepath.Join(dir, "frames.bin"), filepath.Join(dir, "flags.bin"), filepath.Join(dir, "masks.bin")
	if err := writeBinary(frames, s.Frames); err != nil {
		return nil, "", err
	}
	if err := writeBinary(flags, [][]calib.Flag{s.Flags}); err != nil {
		return nil, "", err
	}
	version, err = outside.Script(ctx, "calib_edges.py", frames, flags, fmt.Sprint(s.Width), fmt.Sprint(s.Rows),
		fmt.Sprint(math.Sqrt(float64(s.Noise.Read[0]))), fmt.Sprint(rule.Sigmas), fmt.Sprint(rule.Fraction),
		fmt.Sprint(rule.Contrast), fmt.Sprint(rule.Iterations), masks)
	if err != nil {
		return nil, "", err
	}
	bytes, err := os.ReadFile(masks)
	if err != nil {
		return nil, "", err
	}
	pixels := s.Width * s.Rows
	if len(bytes) != pixels*len(s.Frames) {
		return nil, "", fmt.Errorf("%s: %d bytes for %d frames of %d pixels", masks, len(bytes), len(s.Frames), pixels)
	}
	for i := range s.Frames {
		mask := make([]bool, pixels)
		for p := range mask {
			mask[p] = bytes[i*pixels+p] != 0
		}
		found = append(found, mask)
	}
	return found, strings.TrimSpace(version), nil
}

func writeBinary[T any](path string, blocks [][]T) error {
	file, err := os.Create(path)
	if err != nil {
		return err
	}
	w := bufio.NewWriter(file)
	for _, block := range blocks {
		if err := binary.Write(w, binary.LittleEndian, block); err != nil {
			file.Close() // the first error counts
			return err
		}
	}
	if err := w.Flush(); err != nil {
		file.Close() // the first error counts
		return err
	}
	return file.Close()
}

// Catch is what a method found.
type Catch struct {
	Samples int
	// Struck and Found count struck samples higher than 5 and 8 sigmas.
	Struck, Found [2]int
	// Alone counts samples found that were not struck, farther than 2 pixels along
	// either axis from any that was; Beside those nearer.
	Alone, Beside int
}

// CatchLevels are the heights of Catch.Struck, in sigmas.
var CatchLevels = [2]float64{5, 8}

// Judge counts what was found on pixels that lie at least border pixels inside.
func (s *Struck) Judge(found [][]bool, border int) (c Catch) {
	for f, heights := range s.Height {
		for i, height := range heights {
			if s.inside(i) < border {
				continue
			}
			c.Samples++
			for k, level := range CatchLevels {
				if height > level {
					c.Struck[k]++
					if found[f][i] {
						c.Found[k]++
					}
				}
			}
			switch {
			case height > 0 || !found[f][i]:
			case s.near(f, i):
				c.Beside++
			default:
				c.Alone++
			}
		}
	}
	return c
}

// inside is how many pixels pixel i is away from the frame's edge; 0 on it.
func (s *Struck) inside(i int) int {
	x, y := i%s.Width, i/s.Width
	return min(x, y, s.Width-1-x, s.Rows-1-y)
}

// near tells whether a ray struck within 2 pixels of pixel i of frame f.
func (s *Struck) near(f, i int) bool {
	x, y := i%s.Width, i/s.Width
	for v := max(y-2, 0); v <= min(y+2, s.Rows-1); v++ {
		for u := max(x-2, 0); u <= min(x+2, s.Width-1); u++ {
			if s.Height[f][v*s.Width+u] > 0 {
				return true
			}
		}
	}
	return false
}

// Share is the part of the struck samples above CatchLevels[k] that was found.
func (c Catch) Share(k int) float64 { return float64(c.Found[k]) / float64(c.Struck[k]) }

// Agreement is the part of the struck samples found by either method that both
// found, and their number, on pixels at least border pixels inside.
func (s *Struck) Agreement(a, b [][]bool, border int) (share float64, either int) {
	both := 0
	for f, heights := range s.Height {
		for i, height := range heights {
			if height > 0 && (a[f][i] || b[f][i]) && s.inside(i) >= border {
				either++
				if a[f][i] && b[f][i] {
					both++
				}
			}
		}
	}
	return float64(both) / float64(either), either
}
