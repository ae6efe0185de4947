package fitsutil

import (
	"bytes"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"
)

// badFile is a damaged or foreign file and the one error that Open gives for it.
type badFile struct {
	name     string
	content  []byte
	sentinel error
	hdu      int
	card     string
	offset   int64
	text     string // part of the message
}

// with puts a card in the place of the one that has the same keyword.
func with(cards []string, card string) []string {
	out := slices.Clone(cards)
	for i := range out {
		if out[i][:8] == card[:8] {
			out[i] = card
		}
	}
	return out
}

// badFiles holds every fault that the astrogo/fitsio v0.3.0 reader was measured to panic on or
// to pass over in silence, and more. Files are made by hand from the Standard's rules (4.4.1).
func badFiles() []badFile {
	whole := join(headerBytes(primary(16, 4, 3)...), dataBytes(make([]int16, 12)))
	empty := headerBytes(primary(8)...)
	table := extension("BINTABLE", 8, 4, 2)
	ext := func(cards []string) []byte { return join(empty, headerBytes(cards...)) }
	set := func(card string) []byte {
		return join(headerBytes(with(primary(16, 4, 3), card)...), dataBytes(make([]int16, 12)))
	}
	return []badFile{
		{"empty file", nil, ErrNotFITS, none, "", none, "empty"},
		{"no FITS at all", []byte("<html>404</html>"), ErrNotFITS, 0, "", 0, "does not start with"},
		{"SIMPLE is F", set("SIMPLE  =                    F"), ErrNotFITS, 0, "SIMPLE", 0, "not T"},
		{"SIMPLE is a string", set("SIMPLE  = 'T'"), ErrNotFITS, 0, "SIMPLE", 0, "not T"},
		{"leading CONTINUE", headerBytes("CONTINUE  'x'", "BITPIX  = 8", "NAXIS   = 0"), ErrNotFITS, 0, "", 0, "does not start with"},
		{"leading CONTINUE in extension", ext([]string{"XTENSION= 'IMAGE   '", "CONTINUE  'x'"}), ErrStructure, 1, "BITPIX", none, "no such card"},
		{"cut in its first card", []byte("SIMP"), ErrTruncated, 0, "", 0, "after 4 bytes"},
		{"negative NAXIS1", set("NAXIS1  =                   -4"), ErrStructure, 0, "NAXIS1", 240, "-4"},
		{"float NAXIS1", set("NAXIS1  =                  4.0"), ErrStructure, 0, "NAXIS1", 240, "not an integer"},
		{"huge NAXIS1", set("NAXIS1  =  9223372036854775807"), ErrTooLarge, 0, "NAXIS2", 320, "more bytes"},
		{"NAXIS1 beyond int64", set("NAXIS1  = 92233720368547758080"), ErrStructure, 0, "NAXIS1", 240, "not an integer"},
		{"absurd axes", set("NAXIS1  =        1000000000000"), ErrTruncated, 0, "", 2880 + 2880, "ends"},
		{"string NAXIS1", set("NAXIS1  = '4       '"), ErrStructure, 0, "NAXIS1", 240, "not an integer"},
		{"NAXIS1 not understood", set("NAXIS1  = four"), ErrStructure, 0, "NAXIS1", 240, "\"four\""},
		{"missing NAXIS2", headerBytes(primary(16, 4, 3)[:4]...), ErrStructure, 0, "NAXIS2", none, "no such card"},
		{"string NAXIS", set("NAXIS   = '2       '"), ErrStructure, 0, "NAXIS", 160, "not an integer"},
		{"NAXIS of 1000", set("NAXIS   =                 1000"), ErrStructure, 0, "NAXIS", 160, "0 to 999"},
		{"missing NAXIS", headerBytes(primary(16)[:2]...), ErrStructure, 0, "NAXIS", none, "no such card"},
		{"string BITPIX", set("BITPIX  = '16      '"), ErrStructure, 0, "BITPIX", 80, "not an integer"},
		{"float BITPIX", set("BITPIX  =                 16.0"), ErrStructure, 0, "BITPIX", 80, "not an integer"},
		{"BITPIX of 12", set("BITPIX  =                   12"), ErrStructure, 0, "BITPIX", 80, "none of"},
		{"undefined BITPIX", set("BITPIX  ="), ErrStructure, 0, "BITPIX", 80, "undefined"},
		{"product overflow", headerBytes(primary(16, 1<<32, 1<<32)...), ErrTooLarge, 0, "NAXIS2", 320, "more bytes"},
		{"sum overflow", ext(with(extension("BINTABLE", 8, 1, 1<<62), "PCOUNT  = 9223372036854775807")), ErrTooLarge, 1, "NAXIS2", 2880 + 320, "more bytes"},
		{"empty data behind huge axes", headerBytes(primary(16, 1<<32, 1<<32, 0)[:5]...), ErrStructure, 0, "NAXIS3", none, "no such card"},
		{"BINTABLE with NAXIS=1", ext(extension("BINTABLE", 8, 4)), ErrStructure, 1, "NAXIS", 2880 + 160, "2 axes"},
		{"BINTABLE of BITPIX 16", ext(with(table, "BITPIX  =                   16")), ErrStructure, 1, "BITPIX", 2880 + 80, "must have 8"},
		{"BINTABLE of two groups", ext(with(table, "GCOUNT  =                    2")), ErrStructure, 1, "GCOUNT", 2880 + 480, "must have 1"},
		{"negative PCOUNT", ext(with(table, "PCOUNT  =                   -1")), ErrStructure, 1, "PCOUNT", 2880 + 400, "-1"},
		{"image extension with a heap", ext(with(extension("IMAGE", 8, 4), "PCOUNT  =                    9")), ErrStructure, 1, "PCOUNT", 2880 + 320, "must have 0"},
		{"image extension of two groups", ext(with(extension("IMAGE", 8, 4), "GCOUNT  =                    2")), ErrStructure, 1, "GCOUNT", 2880 + 400, "must have 1"},
		{"XTENSION is a number", ext(append([]string{"XTENSION= 5"}, table[1:]...)), ErrStructure, 1, "XTENSION", 2880, "type of extension"},
		{"header cut at a block", unended(append(primary(16, 4, 3), strings.Repeat(" ", 80))...), ErrNoEnd, 0, "", 2880, "no END"},
		{"header cut within a card", headerBytes(primary(16, 4, 3)...)[:250], ErrTruncated, 0, "", 250, "no END"},
		{"END lost before data", join(unended(primary(16, 4, 3)...), dataBytes([]int16{-2, -3})), ErrNoEnd, 0, "", 2880, "END is lost"},
		{"END behind the bound", join(bytes.Repeat(unended(primary(8)...), maxHeader/blockSize), headerBytes()), ErrNoEnd, 0, "", maxHeader, "hold no END"},
		{"extension header cut at a block", join(empty, unended(table...)), ErrNoEnd, 1, "", 5760, "no END"},
		{"extension cut in its first block", join(empty, headerBytes(table...)[:100]), ErrTruncated, 1, "", 2980, "no END"},
		{"no data", headerBytes(primary(16, 4, 3)...), ErrTruncated, 0, "", 2880, "24 bytes before"},
		{"data cut by one byte", whole[:2880+23], ErrTruncated, 0, "", 2903, "1 bytes before"},
		{"table cut", ext(table), ErrTruncated, 1, "", 5760, "8 bytes before"},
		{"junk of a block behind the last HDU", join(whole, []byte("junk"), make([]byte, 2876)), ErrStructure, 0, "", 5760, "do not start with XTENSION"},
		{"junk behind zeros", join(whole, make([]byte, 2*chunkBytes), []byte{1}), ErrStructure, 0, "", 5760, "do not start with XTENSION"},
	}
}

func TestOpenRefusesBadFiles(t *testing.T) {
	for _, bad := range badFiles() {
		t.Run(bad.name, func(t *testing.T) {
			path := writeTemp(t, "bad.fits", bad.content)
			f, err := Open(path)
			require.Nil(t, f)
			e := requireError(t, err, bad.sentinel, path, bad.text)
			require.Equal(t, Error{path, bad.hdu, bad.card, bad.offset, e.What, e.Cure, e.Err}, *e)
			require.NotEmpty(t, e.Cure)
		})
	}
}

// Faults of cards matter only to whoever asks for them.
func TestImageRefusesBadCards(t *testing.T) {
	for _, c := range []struct {
		name, card, key string
		sentinel        error
	}{
		{"string BZERO", "BZERO   = 'much'", "BZERO", ErrType},
		{"BZERO not understood", "BZERO   = 1,5", "BZERO", ErrBadCard},
		{"undefined BSCALE", "BSCALE  = ", "BSCALE", ErrType},
		{"zero BSCALE", "BSCALE  =                  0.0", "BSCALE", ErrBadCard},
		{"float BLANK", "BLANK   =                  0.5", "BLANK", ErrType},
		{"BSCALE beyond float64", "BSCALE  = 1E400", "BSCALE", ErrBadCard},
	} {
		t.Run(c.name, func(t *testing.T) {
			content := join(headerBytes(append(primary(16, 2), c.card)...), dataBytes([]int16{1, 2}))
			f := openTest(t, writeTemp(t, "card.fits", content))
			im, err := f.FirstImage()
			require.Nil(t, im)
			e := requireError(t, err, c.sentinel, f.Path())
			require.Equal(t, c.key, e.Card)
			require.Equal(t, int64(320), e.Offset)
			require.Equal(t, 0, e.HDU)
		})
	}
}

func TestImageRefusesOtherHDUs(t *testing.T) {
	table := join(headerBytes(append(extension("BINTABLE", 8, 4, 2), "EXTNAME = 'T'")...), dataBytes(make([]byte, 8)))
	packed := join(headerBytes(append(extension("BINTABLE", 8, 8, 1), "ZIMAGE  =                    T")...), dataBytes(make([]byte, 8)))
	f := openTest(t, writeTemp(t, "none.fits", join(headerBytes(primary(8)...), table)))
	_, err := f.FirstImage()
	requireError(t, err, ErrMissingHDU, "no HDU holds pixels")
	_, err = f.Image(0)
	requireError(t, err, ErrType, "HDU 0", "no pixels")
	_, err = f.Image(1)
	requireError(t, err, ErrType, "HDU 1", "BINTABLE")
	_, err = f.Image(2)
	requireError(t, err, ErrMissingHDU, "no HDU 2")
	_, err = f.Image(-1)
	requireError(t, err, ErrMissingHDU)
	_, err = f.ImageNamed("t")
	requireError(t, err, ErrType, "BINTABLE")
	_, err = f.ImageNamed("SIGNAL")
	requireError(t, err, ErrMissingHDU, "SIGNAL")

	f = openTest(t, writeTemp(t, "packed.fits", join(headerBytes(primary(8)...), packed)))
	_, err = f.FirstImage()
	requireError(t, err, ErrCompressed, "HDU 1", "funpack")
}

func TestOpenToleratesTails(t *testing.T) {
	whole := join(headerBytes(primary(16, 4, 3)...), dataBytes(make([]int16, 12)))
	for name, content := range map[string][]byte{
		"fill missing":              whole[:2880+24],
		"fill of header missing":    headerBytes(primary(8)...)[:4*80],
		"junk below a block":        join(whole, bytes.Repeat([]byte("x"), 2879)),
		"zeros of many blocks":      join(whole, make([]byte, 3*chunkBytes+1)),
		"zero axis behind huge":     headerBytes(primary(16, 1<<32, 1<<32, 0)...),
		"NULs fill the header":      join(headerBytes(primary(8)...)[:4*80], make([]byte, blockSize-4*80)),
		"random groups are skipped": join(headerBytes(append(primary(16, 0, 2), "GROUPS  = T", "PCOUNT  = 1", "GCOUNT  = 2")...), dataBytes(make([]int16, 6)), headerBytes(extension("IMAGE", 8)...)),
	} {
		t.Run(name, func(t *testing.T) { openTest(t, writeTemp(t, "tail.fits", content)) })
	}
}

func TestOpenRefusesWhatIsNoFile(t *testing.T) {
	dir := t.TempDir()
	_, err := Open(dir)
	requireError(t, err, ErrNotFITS, "folder")
	_, err = Open(filepath.Join(dir, "nowhere.fits"))
	requireError(t, err, os.ErrNotExist, "no such file")
	pipe := filepath.Join(dir, "pipe.fits")
	require.NoError(t, syscall.Mkfifo(pipe, 0o600))
	_, err = Open(pipe) // must not wait for a writer
	requireError(t, err, ErrNotFITS, "no regular file")
}
