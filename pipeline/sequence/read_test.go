package sequence_test

import (
	"bytes"
	"context"
	"errors"
	"image"
	"image/color"
	"image/png"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

func TestReadGivesWhatWasWritten(t *testing.T) {
	for _, mounting := range []string{instrument.Square, instrument.Diagonal} {
		s := build(t, onlyTarget(small(t, mounting)), onlyProfile(small(t, mounting)))
		read, err := sequence.Read(context.Background(), write(t, s))
		require.NoError(t, err)
		require.Equal(t, s.Steps, read.Steps)
		require.Equal(t, s.Code, read.Code)
		require.Equal(t, s, read)
		require.Len(t, read.SHA, 64)
		require.Equal(t, 24, read.N())
		require.Len(t, read.DarkColumns(), 7)
		require.Equal(t, 2, read.ElementMirrors())
	}
}

// A sequence edited by hand: each edit of the tables leaves sequence.fits valid
// FITS and must be refused for what was edited.
var edits = []struct {
	name string
	edit func(s *sequence.Sequence)
	want string
}{
	{"family", func(s *sequence.Sequence) { s.Family = "legendre" }, "CODEPOLY"},
	{"unknown family", func(s *sequence.Sequence) { s.Family = "walsh" }, "FAMILY \"walsh\" is no code family"},
	{"size", func(s *sequence.Sequence) { s.K++ }, "CODEK 17 and CODEL 8 are not those"},
	{"overlap", func(s *sequence.Sequence) { s.L-- }, "CODEK 16 and CODEL 7 are not those"},
	{"polynomial", func(s *sequence.Sequence) { s.Poly = 61 }, "CODE row"}, // primitive, of other rows
	{"polynomial not primitive", func(s *sequence.Sequence) { s.Poly = 33 }, "CODEPOLY 33 is no primitive polynomial"},
	{"polynomial of another degree", func(s *sequence.Sequence) { s.Poly = 11 }, "CODEPOLY 11 is no primitive polynomial"},
	{"seed", func(s *sequence.Sequence) { s.OrderSeed = 6 }, "ORDSEED is 6 where target.yaml has code.seed 5"},
	{"profile name", func(s *sequence.Sequence) { s.ProfileName = "other" }, "PROFNAME \"other\""},
	{"profile digest", func(s *sequence.Sequence) { s.ProfileSHA = strings.Repeat("0", 64) }, "profile.yaml: the profile is not the one"},
	{"target digest", func(s *sequence.Sequence) { s.TargetSHA = strings.Repeat("0", 64) }, "target.yaml: the target is not the one"},
	{"step twice", func(s *sequence.Sequence) { s.Steps[7].Step = 7 }, "STEPS row 8 has STEP 7, not 8"},
	{"steps exchanged", func(s *sequence.Sequence) { s.Steps[3], s.Steps[4] = s.Steps[4], s.Steps[3] }, "STEPS row 4 has STEP 5, not 4"},
	{"unknown kind", func(s *sequence.Sequence) { s.Steps[0].Kind = "zero" }, "step 1 has the unknown KIND \"zero\""},
	{"lamp lost", func(s *sequence.Sequence) { s.Steps[first(s, sequence.Arc)].Lamp = "" }, "of kind arc has no LAMP"},
	{"lamp on the sky", func(s *sequence.Sequence) { s.Steps[first(s, sequence.Science)].Lamp = "NeAr" }, "is no lamp frame and has LAMP \"NeAr\""},
	{"bias exposed", func(s *sequence.Sequence) { s.Steps[0].ExptimeSeconds = 1 }, "of kind bias has EXPTIME 1, not 0"},
	{"no exposure", func(s *sequence.Sequence) { s.Steps[first(s, sequence.Dark)].ExptimeSeconds = 0 }, "EXPTIME 0, not above 0"},
	{"row beyond", func(s *sequence.Sequence) { s.Steps[first(s, sequence.Science)].Row = 31 }, "ROW 31 where the code has rows 0 to 30"},
	{"science without row", func(s *sequence.Sequence) { s.Steps[first(s, sequence.Science)].Row = -1 }, "science step without a code ROW"},
	{"off with row", func(s *sequence.Sequence) { s.Steps[first(s, sequence.AllOff)].Row = 3 }, "has the code ROW 3, not -1"},
	{"cycle without row", func(s *sequence.Sequence) { s.Steps[first(s, sequence.Arc)].Cycle = 1 }, "ROW -1 and CYCLE 1"},
	{"row without cycle", func(s *sequence.Sequence) { s.Steps[first(s, sequence.Science)].Cycle = 0 }, "CYCLE 0: cycles count from 1"},
	{"another row", func(s *sequence.Sequence) {
		i := first(s, sequence.Science)
		s.Steps[i].Row = (s.Steps[i].Row + 1) % s.V
	}, "of the m-sequence code of 31 columns, as STEPS says"},
	{"rows exchanged", func(s *sequence.Sequence) {
		i := first(s, sequence.Science)
		s.Code[i], s.Code[i+1] = s.Code[i+1], s.Code[i]
	}, "of the m-sequence code of 31 columns, as STEPS says"},
	{"row repeated", func(s *sequence.Sequence) {
		i := first(s, sequence.Science)
		s.Steps[i+1] = s.Steps[i]
		s.Steps[i+1].Step++
		s.Code[i+1] = s.Code[i]
	}, "repeats ROW"},
	{"cycle lacks a row", func(s *sequence.Sequence) {
		n := len(s.Steps) - 2 // before the last all-off
		s.Steps[n], s.Code[n] = s.Steps[n+1], s.Code[n+1]
		s.Steps[n].Step = n + 1
		s.Steps, s.Code = s.Steps[:n+1], s.Code[:n+1]
	}, "science cycle 2 lacks code row"},
	{"cycle skipped", func(s *sequence.Sequence) {
		for i := range s.Steps {
			if s.Steps[i].Cycle == 2 {
				s.Steps[i].Cycle = 3
			}
		}
	}, "science cycle 2 lacks code row 0"},
	{"dark bit flipped", func(s *sequence.Sequence) { flip(s, first(s, sequence.Science), s.DarkColumns()[0]) }, "as STEPS says"},
	{"bias opened", func(s *sequence.Sequence) { flip(s, 0, 0) }, "belongs to a step of kind bias and is not 0 throughout"},
	{"no lamp pattern", func(s *sequence.Sequence) {
		flip(s, first(s, sequence.Arc), s.ElementColumns()[7])
	}, "neither a code row nor all, no, every other or one element"},
	{"two of no bit", func(s *sequence.Sequence) {
		s.Code[0] = bytes.Repeat([]byte{2}, s.V)
	}, "CODE row 1 holds 2, which is no bit"},
	{"mask of another step", func(s *sequence.Sequence) {
		i := first(s, sequence.Science)
		s.Steps[i].MaskID, s.Steps[i+1].MaskID = s.Steps[i+1].MaskID, s.Steps[i].MaskID
	}, "where CODE, expanded by ELEMENTS and ROWS, gives"},
	{"no mask", func(s *sequence.Sequence) { s.Steps[0].MaskID = "" }, "step 1 has MASKID \"\""},
	{"column order", func(s *sequence.Sequence) { s.Elements[2].Column = 3 }, "ELEMENTS row 3 has COLUMN 3, not 2"},
	{"column lost", func(s *sequence.Sequence) { s.Elements = s.Elements[:30] }, "ELEMENTS has"},
	{"element order", func(s *sequence.Sequence) {
		c := s.ElementColumns()
		a, b := &s.Elements[c[3]], &s.Elements[c[4]]
		a.Element, b.Element = b.Element, a.Element
	}, "where element 3 is next in order"},
	{"strips exchanged", func(s *sequence.Sequence) {
		c := s.ElementColumns()
		a, b := &s.Elements[c[3]], &s.Elements[c[4]]
		a.First, a.Last, b.First, b.Last = b.First, b.Last, a.First, a.Last
	}, "leaves a gap behind the element before it"},
	{"elements overlap", func(s *sequence.Sequence) {
		e := &s.Elements[s.ElementColumns()[3]]
		e.First, e.Last = e.First-1, e.Last-1
	}, "overlaps the element before it"},
	{"wider element", func(s *sequence.Sequence) { s.Elements[s.ElementColumns()[23]].Last++ }, "code.element_mirrors 2"},
	{"off the device", func(s *sequence.Sequence) {
		for i := range s.Elements {
			if !s.Elements[i].Dark {
				s.Elements[i].First += 40
				s.Elements[i].Last += 40
			}
		}
	}, "off the device's u of 0 to 81"},
	{"dark column with mirrors", func(s *sequence.Sequence) {
		e := &s.Elements[s.DarkColumns()[0]]
		e.First, e.Last = 0, 1
	}, "gives mirrors to a dark column"},
	{"element made dark", func(s *sequence.Sequence) {
		e := &s.Elements[s.ElementColumns()[23]]
		*e = sequence.Element{Column: e.Column, Element: -1, First: -1, Last: -1, Dark: true}
	}, "ELEMENTS has 8 dark columns where target.yaml has another code.dark"},
	{"moved field", func(s *sequence.Sequence) {
		for i := range s.Elements {
			if !s.Elements[i].Dark {
				s.Elements[i].First++
				s.Elements[i].Last++
			}
		}
	}, "where CODE, expanded by ELEMENTS and ROWS, gives"},
	{"unknown use", func(s *sequence.Sequence) { s.Rows[0].Use = "open" }, "ROWS row 1 has the unknown USE \"open\""},
	{"rows backwards", func(s *sequence.Sequence) { s.Rows[0].First, s.Rows[0].Last = s.Rows[0].Last, s.Rows[0].First }, "ROWS row 1 reaches from -7 back to -52"},
	{"rows overlap", func(s *sequence.Sequence) { s.Rows[1].First-- }, "neither overlap nor leave a gap"},
	{"rows leave a gap", func(s *sequence.Sequence) { s.Rows[1].First++; s.Rows[1].Last++ }, "neither overlap nor leave a gap"},
	{"rows end early", func(s *sequence.Sequence) { s.Rows[lastTile(s)].Last-- }, "ROWS ends at 28 where the device's w ends at 29"},
	{"rows off the device", func(s *sequence.Sequence) { s.Rows[lastTile(s)].Last++ }, "off the device's w of -52 to 29"},
	{"sentinel of nothing", func(s *sequence.Sequence) { s.Rows[1].Element = -1 }, "is a sentinel of no element"},
	{"sentinel of another", func(s *sequence.Sequence) { s.Rows[1].Element = 2 }, "where CODE, expanded by ELEMENTS and ROWS, gives"},
	{"sentinel beyond", func(s *sequence.Sequence) { s.Rows[1].Element = 24 }, "names element 24 where the field has elements 0 to 23"},
	{"coded of one", func(s *sequence.Sequence) { s.Rows[0].Element = 2 }, "is coded and names element 2, not -1"},
	{"closed of another", func(s *sequence.Sequence) { s.Rows[len(s.Rows)-1].Element = 2 }, "where CODE, expanded by ELEMENTS and ROWS, gives"},
	{"closed sentinel", func(s *sequence.Sequence) {
		s.Rows = append(s.Rows, sequence.RowRange{First: 4, Last: 9, Use: sequence.UseClosed, Element: 20})
	}, "both speak of element 20 in the mirror rows 4 to 5"},
}

func first(s *sequence.Sequence, k sequence.Kind) int { return s.StepsOf(k)[0] }

// flip changes a bit of one step alone: steps may share their bits.
func flip(s *sequence.Sequence, i, column int) {
	s.Code[i] = bytes.Clone(s.Code[i])
	s.Code[i][column] ^= 1
}

func lastTile(s *sequence.Sequence) int {
	for i := len(s.Rows) - 1; ; i-- {
		if s.Rows[i].Use == sequence.UseCoded {
			return i
		}
	}
}

func TestReadRefusesEditedTables(t *testing.T) {
	target, profile := small(t, instrument.Diagonal)
	whole := build(t, target, profile)
	dir := write(t, whole)
	_, err := sequence.Read(context.Background(), dir)
	require.NoError(t, err, "the sequence before the edits")
	for _, c := range edits {
		t.Run(c.name, func(t *testing.T) {
			s := clone(whole)
			c.edit(s)
			copied := filepath.Join(t.TempDir(), "copy")
			require.NoError(t, os.CopyFS(copied, os.DirFS(dir)))
			require.NoError(t, s.WriteFITS(filepath.Join(copied, "sequence.fits")))
			requireRefused(t, copied, c.want)
		})
	}
}

// requireRefused demands one sentence that names a file of the folder, says
// what is wrong and gives a cure behind a semicolon.
func requireRefused(t *testing.T, dir, want string) {
	t.Helper()
	s, err := sequence.Read(context.Background(), dir)
	require.Error(t, err)
	require.Nil(t, s)
	require.Contains(t, err.Error(), want)
	require.Contains(t, err.Error(), dir)
	require.Contains(t, err.Error(), "; ", "the cure")
	require.NotContains(t, err.Error(), "\n")
}

// Files lost, exchanged or changed.
var damages = []struct {
	name   string
	damage func(t *testing.T, dir string, s *sequence.Sequence)
	want   string
}{
	{"no sequence.fits", func(t *testing.T, dir string, _ *sequence.Sequence) { remove(t, dir, "sequence.fits") }, "holds no sequence.fits"},
	{"no profile", func(t *testing.T, dir string, _ *sequence.Sequence) { remove(t, dir, "profile.yaml") }, "profile.yaml: the file is missing"},
	{"no target", func(t *testing.T, dir string, _ *sequence.Sequence) { remove(t, dir, "target.yaml") }, "target.yaml: the file is missing"},
	{"no mask", func(t *testing.T, dir string, s *sequence.Sequence) {
		remove(t, dir, "masks/"+s.Steps[40].MaskID+".png")
	}, ".png: the file is missing"},
	{"no masks", func(t *testing.T, dir string, _ *sequence.Sequence) { remove(t, dir, "masks") }, ".png: the file is missing"},
	{"mask exchanged", func(t *testing.T, dir string, s *sequence.Sequence) {
		data := load(t, dir, "masks/"+s.Steps[41].MaskID+".png")
		store(t, dir, "masks/"+s.Steps[40].MaskID+".png", data)
	}, "its mirrors have the digest"},
	{"mask turned upside down", func(t *testing.T, dir string, s *sequence.Sequence) {
		name := "masks/" + s.Steps[40].MaskID + ".png"
		img, err := png.Decode(bytes.NewReader(load(t, dir, name)))
		require.NoError(t, err)
		store(t, dir, name, encode(t, 1, func(x, y int) bool { return isWhite(img, x, 29-y) }, 53, 30))
	}, "its mirrors have the digest"},
	{"mask of eight bits", func(t *testing.T, dir string, s *sequence.Sequence) {
		name := "masks/" + s.Steps[40].MaskID + ".png"
		img, err := png.Decode(bytes.NewReader(load(t, dir, name)))
		require.NoError(t, err)
		store(t, dir, name, encode(t, 8, func(x, y int) bool { return isWhite(img, x, y) }, 53, 30))
	}, "8 bits a pixel where a mask has 1"},
	{"mask of another size", func(t *testing.T, dir string, s *sequence.Sequence) {
		store(t, dir, "masks/"+s.Steps[40].MaskID+".png", encode(t, 1, func(int, int) bool { return false }, 54, 30))
	}, "54 x 30 pixels where the device has 53 x 30 mirrors"},
	{"mask cut off", func(t *testing.T, dir string, s *sequence.Sequence) {
		name := "masks/" + s.Steps[40].MaskID + ".png"
		store(t, dir, name, load(t, dir, name)[:60])
	}, "cannot be decoded"},
	{"mask no PNG", func(t *testing.T, dir string, s *sequence.Sequence) {
		store(t, dir, "masks/"+s.Steps[40].MaskID+".png", []byte("P4\n53 30\n"))
	}, "it is no PNG"},
	{"strange mask", func(t *testing.T, dir string, s *sequence.Sequence) {
		store(t, dir, "masks/0123456789abcdef.png", load(t, dir, "masks/"+s.Steps[40].MaskID+".png"))
	}, "no step shows this mask"},
	{"profile edited", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "profile.yaml", "read_s: 4", "read_s: 5")
	}, "the profile is not the one"},
	{"profile commented", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "profile.yaml", "read_s: 4", "read_s: 4 # seconds")
	}, "the profile is not the one"},
	{"profile of another device", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "profile.yaml", "columns: 53", "columns: 50")
	}, "the profile is not the one"},
	{"profile with a wrong key", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "profile.yaml", "read_s: 4", "read_ms: 4")
	}, "detector.read_ms"},
	{"target edited", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "target.yaml", "dec_deg: -3", "dec_deg: -4")
	}, "the target is not the one"},
	{"target with a wrong key", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "target.yaml", "dec_deg: -3", "dec: -3")
	}, "dec: unknown key"},
	{"sequence.fits cut off", func(t *testing.T, dir string, _ *sequence.Sequence) {
		store(t, dir, "sequence.fits", load(t, dir, "sequence.fits")[:2880*3])
	}, "sequence.fits"},
	{"sequence.fits without STEPS", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "sequence.fits", "'STEPS   '", "'STAPS   '")
	}, "sequence.fits"},
	{"sequence.fits without a card", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "sequence.fits", "ORDSEED =", "ORDSEEX =")
	}, "ORDSEED"},
	{"sequence.fits without a column", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "sequence.fits", "'EXPTIME '", "'EXTIME  '")
	}, "EXPTIME"},
	{"sequence.fits with a card of text", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "sequence.fits", "CODEV   =                   31", "CODEV   = 'thirtyone'         ")
	}, "CODEV"},
	{"sequence.fits with a size off the scale", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "sequence.fits", "CODEV   =                   31", "CODEV   =              4000000")
	}, "CODEV 4000000 is outside 1 to 4095"},
	{"sequence.fits of another size", func(t *testing.T, dir string, _ *sequence.Sequence) {
		replace(t, dir, "sequence.fits", "CODEV   =                   31", "CODEV   =                   15")
	}, "where bytes of 15 columns by"},
}

func remove(t *testing.T, dir, name string) {
	require.NoError(t, os.RemoveAll(filepath.Join(dir, name)))
}

func load(t *testing.T, dir, name string) []byte {
	data, err := os.ReadFile(filepath.Join(dir, name))
	require.NoError(t, err)
	return data
}

func store(t *testing.T, dir, name string, data []byte) {
	require.NoError(t, os.WriteFile(filepath.Join(dir, name), data, 0o644))
}

func replace(t *testing.T, dir, name, from, to string) {
	data := load(t, dir, name)
	require.Contains(t, string(data), from)
	store(t, dir, name, bytes.Replace(data, []byte(from), []byte(to), 1))
}

func isWhite(img image.Image, x, y int) bool {
	r, _, _, _ := img.At(x, y).RGBA()
	return r > 0
}

// encode makes a PNG of 1 or 8 bits a pixel with image/png.
func encode(t *testing.T, bits int, on func(x, y int) bool, columns, rows int) []byte {
	rect := image.Rect(0, 0, columns, rows)
	palette := image.NewPaletted(rect, color.Palette{color.White, color.Black})
	grey := image.NewGray(rect)
	for y := range rows {
		for x := range columns {
			if on(x, y) {
				grey.SetGray(x, y, color.Gray{Y: 255})
			} else {
				palette.SetColorIndex(x, y, 1)
			}
		}
	}
	var img image.Image = palette
	if bits == 8 {
		img = grey
	}
	var out bytes.Buffer
	require.NoError(t, png.Encode(&out, img))
	return out.Bytes()
}

func TestReadRefusesDamagedFolders(t *testing.T) {
	target, profile := small(t, instrument.Diagonal)
	s := build(t, target, profile)
	dir := write(t, s)
	for _, c := range damages {
		t.Run(c.name, func(t *testing.T) {
			copied := filepath.Join(t.TempDir(), "copy")
			require.NoError(t, os.CopyFS(copied, os.DirFS(dir)))
			c.damage(t, copied, s)
			requireRefused(t, copied, c.want)
		})
	}
}

// Another writer's PNG of the same mirrors is as good: one bit a pixel by a
// palette whose first colour is white.
func TestReadTakesOtherPNGs(t *testing.T) {
	target, profile := small(t, instrument.Square)
	s := build(t, target, profile)
	dir := write(t, s)
	for i, st := range s.Steps {
		m := s.Mask(i)
		store(t, dir, "masks/"+st.MaskID+".png", encode(t, 1, func(x, y int) bool { return m.On[y*m.Columns+x] == 1 }, m.Columns, m.Rows))
	}
	_, err := sequence.Read(context.Background(), dir)
	require.NoError(t, err)
}

func TestReadNamesAMissingFolder(t *testing.T) {
	_, err := sequence.Read(context.Background(), filepath.Join(t.TempDir(), "nowhere"))
	require.ErrorIs(t, err, fs.ErrNotExist)
	var e *sequence.Error
	require.True(t, errors.As(err, &e))
	require.Equal(t, "give the folder that mirrorloom plan wrote", e.Cure)
}
