package sequence_test

import (
	"bytes"
	"fmt"
	"image"
	"image/png"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// everySequence writes the two demo sequences and a small one with sentinel
// and closed rows in both mountings.
func everySequence(t *testing.T) (sequences []*sequence.Sequence, dirs []string) {
	t.Helper()
	for _, name := range [][2]string{{"demo", "optical"}, {"demo-infrared", "infrared"}} {
		target, err := sequence.LoadTarget(name[0])
		require.NoError(t, err)
		profile, err := instrument.Load(name[1])
		require.NoError(t, err)
		sequences = append(sequences, build(t, target, profile))
	}
	for _, mounting := range []string{instrument.Square, instrument.Diagonal} {
		sequences = append(sequences, build(t, onlyTarget(small(t, mounting)), onlyProfile(small(t, mounting))))
	}
	for _, c := range []struct {
		mounting      string
		field         sequence.FieldChoice
		mirrors, turn int
	}{
		{instrument.Square, sequence.FieldChoice{OffsetU: -2, Rows: []int{1, 27}}, 2, 33},
		{instrument.Square, sequence.FieldChoice{OffsetU: 14}, 1, 180},
		{instrument.Diagonal, sequence.FieldChoice{OffsetU: -9, Rows: []int{-9, 17}}, 2, -33},
		{instrument.Diagonal, sequence.FieldChoice{OffsetU: 13}, 1, 0},
		{instrument.Diagonal, sequence.FieldChoice{}, 3, 90},
	} {
		target, profile := small(t, c.mounting)
		target.Field, target.Code.ElementMirrors, target.RotangDeg = &c.field, c.mirrors, float64(c.turn)
		sequences = append(sequences, build(t, target, profile))
	}
	for _, s := range sequences {
		dirs = append(dirs, write(t, s))
	}
	return sequences, dirs
}

func onlyTarget(target *sequence.Target, _ *instrument.Profile) *sequence.Target      { return target }
func onlyProfile(_ *sequence.Target, profile *instrument.Profile) *instrument.Profile { return profile }

// The checks against programs from outside share one set of sequences.
func TestCrosscheck(t *testing.T) {
	sequences, dirs := everySequence(t)
	t.Run("Python", func(t *testing.T) { checkByPython(t, sequences, dirs) })
	t.Run("PNG", func(t *testing.T) { checkPNG(t, sequences, dirs) })
	t.Run("fitsverify", func(t *testing.T) {
		for _, dir := range dirs { // fitsverify is HEASARC's
			out := outside.Program(t, "fitsverify", filepath.Join(dir, "sequence.fits"))
			require.Contains(t, out, "Verification found 0 warning(s) and 0 error(s)")
		}
	})
}

// checkByPython has Python build every mask, digest and code row from the
// contract's words with numpy, reading with astropy and PIL (all of Debian).
func checkByPython(t *testing.T, sequences []*sequence.Sequence, dirs []string) {
	lines := strings.Fields(outside.Python(t, "sequence_masks.py", dirs...))
	var want []string
	for _, s := range sequences {
		coded, masks := 0, map[string]bool{}
		for _, st := range s.Steps {
			masks[st.MaskID] = true
			if st.Row >= 0 {
				coded++
			}
		}
		want = append(want, fmt.Sprint(len(s.Steps)), fmt.Sprint(coded), fmt.Sprint(len(masks)), s.Profile.DMD.Mounting)
	}
	require.Equal(t, want, lines)
	t.Log(lines)
}

// naiveStates applies the contract to one mirror after the other.
func naiveStates(s *sequence.Sequence, i int) []uint8 {
	d := s.Profile.DMD
	on := make([]uint8, 0, d.Columns*d.Rows)
	for y := range d.Rows {
		for x := range d.Columns {
			u, w := x, y
			if d.Mounting == instrument.Diagonal {
				u, w = x+y, y-x
			}
			on = append(on, naiveState(s, i, u, w))
		}
	}
	return on
}

func naiveState(s *sequence.Sequence, i, u, w int) uint8 {
	for _, e := range s.Elements {
		if e.Dark || u < e.First || u > e.Last {
			continue
		}
		state := s.Code[i][e.Column]
		for _, r := range s.Rows {
			if w < r.First || w > r.Last {
				continue
			}
			switch {
			case r.Use == sequence.UseClosed && (r.Element == -1 || r.Element == e.Element):
				return 0
			case r.Use == sequence.UseSentinel && s.Steps[i].Kind == sequence.Science:
				state = 0
				if r.Element == e.Element {
					state = 1
				}
			}
		}
		return state
	}
	return 0 // a mirror of no element
}

// checkPNG demands that the PNGs, read by image/png and, a share of the large
// ones and all of the small, by Debian's pngtopnm, show CODE expanded by
// ELEMENTS and ROWS mirror by mirror.
func checkPNG(t *testing.T, sequences []*sequence.Sequence, dirs []string) {
	const share = 8
	masks, byNetpbm := 0, 0
	for k, s := range sequences {
		seen := map[string]bool{}
		for i, st := range s.Steps {
			if seen[st.MaskID] {
				continue
			}
			seen[st.MaskID] = true
			on := naiveStates(s, i)
			require.Equal(t, on, s.Mask(i).On)
			path := filepath.Join(dirs[k], "masks", st.MaskID+".png")
			require.Equal(t, on, byImagePNG(t, path), path)
			if len(on) < 10000 || len(seen)%share == 0 {
				require.Equal(t, on, byPNGToPNM(t, path), path)
				byNetpbm++
			}
		}
		masks += len(seen)
	}
	t.Logf("%d masks of %d sequences, %d of them by pngtopnm", masks, len(sequences), byNetpbm)
}

func byImagePNG(t *testing.T, path string) []uint8 {
	data, err := os.ReadFile(path)
	require.NoError(t, err)
	require.Equal(t, byte(1), data[24], "bits a pixel in IHDR")
	img, err := png.Decode(bytes.NewReader(data))
	require.NoError(t, err)
	return states(img)
}

func states(img image.Image) []uint8 {
	var on []uint8
	b := img.Bounds()
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			r, _, _, _ := img.At(x, y).RGBA()
			on = append(on, uint8(r>>15))
		}
	}
	return on
}

// byPNGToPNM reads what pngtopnm makes of a PNG of one bit: a raw PBM, eight
// pixels a byte, 1 black (netpbm's pbm(5)).
func byPNGToPNM(t *testing.T, path string) []uint8 {
	out := outside.Program(t, "pngtopnm", path)
	var columns, rows int
	_, err := fmt.Sscanf(out, "P4\n%d %d\n", &columns, &rows)
	require.NoError(t, err)
	header := fmt.Sprintf("P4\n%d %d\n", columns, rows)
	bits, width := out[len(header):], (columns+7)/8
	require.Len(t, bits, width*rows)
	var on []uint8
	for y := range rows {
		for x := range columns {
			on = append(on, 1-bits[y*width+x/8]>>(7-x%8)&1)
		}
	}
	return on
}
