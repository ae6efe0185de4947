package typeface

import (
	"testing"

	"github.com/stretchr/testify/require"
	"golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
)

// Widths in the font's 2048 units to the em: digits 1139, the full stop 569, W 1933 (the
// widths of Helvetica and Arial, 556, 278 and 944 thousandths, to which Liberation Sans
// conforms: Adobe Font Metrics, Core 14).
func TestWidth(t *testing.T) {
	f, err := Regular()
	require.NoError(t, err)
	require.InDelta(t, 10*0.556, f.Width("0", 10), 0.005)
	require.InDelta(t, 10*(0.278+0.944), f.Width(".W", 10), 0.005)
	b, err := Bold()
	require.NoError(t, err)
	require.Greater(t, b.Width("night", 10), f.Width("night", 10))
}

func TestWrapAndFit(t *testing.T) {
	f, err := Regular()
	require.NoError(t, err)
	require.Equal(t, []string{"000", "000"}, f.Wrap("000  000", 10, 3*5.6))
	require.Equal(t, []string{"000 000"}, f.Wrap("000 000", 10, 6*5.57+2.8))
	require.Equal(t, []string{"00", "00", "0 0"}, f.Wrap("00000 0", 10, 15))
	require.Equal(t, []string{""}, f.Wrap("", 10, 15))
	require.Equal(t, []string{"0", "0"}, f.Wrap("00", 10, 1)) // a character at least
	require.Equal(t, "00000", f.Fit("00000", 10, 28))
	short := f.Fit("00000", 10, 26)
	require.Equal(t, "00…", short)
	require.Equal(t, "", f.Fit("00000", 10, 1))
}

// In a subset, used glyphs and the parts that they are made of have the outlines of the whole
// font, others none; numbers of glyphs and widths are what they were. Read by another reader.
func TestSubset(t *testing.T) {
	f, err := Regular()
	require.NoError(t, err)
	data, err := f.Subset("Aé″")
	require.NoError(t, err)
	require.Less(t, len(data), len(f.data)/3)
	again, err := f.Subset("Aé″")
	require.NoError(t, err)
	require.Equal(t, data, again)
	small, err := sfnt.Parse(data)
	require.NoError(t, err)
	require.Equal(t, f.font.NumGlyphs(), small.NumGlyphs())
	var one, two sfnt.Buffer
	outline := func(from *sfnt.Font, b *sfnt.Buffer, r rune) (sfnt.Segments, fixed.Int26_6) {
		glyph, err := from.GlyphIndex(b, r)
		require.NoError(t, err)
		require.NotZero(t, glyph, string(r))
		segments, err := from.LoadGlyph(b, glyph, f.em, nil)
		require.NoError(t, err)
		width, err := from.GlyphAdvance(b, glyph, f.em, font.HintingNone)
		require.NoError(t, err)
		return append(sfnt.Segments{}, segments...), width
	}
	for _, r := range "Aé″" {
		want, wide := outline(f.font, &one, r)
		got, w := outline(small, &two, r)
		require.NotEmpty(t, want)
		require.Equal(t, want, got, string(r))
		require.Equal(t, wide, w)
	}
	left, w := outline(small, &two, 'B')
	_, wide := outline(f.font, &one, 'B')
	require.Empty(t, left)
	require.Equal(t, wide, w)
	// The sum of a whole font file is 0xB1B0AFBA (OpenType, head.checkSumAdjustment).
	require.Equal(t, uint32(0xB1B0AFBA), sum(data))
}
