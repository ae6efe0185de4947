// Package typeface measures words in the font of the night sheet, and gives that font to the
// page: without it a page that is laid out for two sheets of paper would need three where
// another font is wider.
//
// The font is Liberation Sans (SIL Open Font License 1.1), of which a page gets the glyphs it
// uses.
package typeface

import (
	"fmt"
	"strings"

	"codeberg.org/go-fonts/liberation/liberationsansbold"
	"codeberg.org/go-fonts/liberation/liberationsansregular"
	"golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
)

// Face is a font of one weight. Not for several goroutines at once.
type Face struct {
	data   []byte
	font   *sfnt.Font
	em     fixed.Int26_6
	buffer sfnt.Buffer
}

// Regular and Bold open the two weights.
func Regular() (*Face, error) { return open(liberationsansregular.TTF) }

// Bold is the heavier one.
func Bold() (*Face, error) { return open(liberationsansbold.TTF) }

func open(data []byte) (*Face, error) {
	f, err := sfnt.Parse(data)
	if err != nil {
		return nil, fmt.Errorf("font of the night sheet: %w", err)
	}
	return &Face{data: data, font: f, em: fixed.Int26_6(f.UnitsPerEm()) << 6}, nil
}

// Width is that of words set in so many points, in points; of a character that the font
// lacks, that of its sign for one.
func (f *Face) Width(words string, points float64) float64 {
	sum := fixed.Int26_6(0)
	for _, r := range words {
		glyph, err := f.font.GlyphIndex(&f.buffer, r)
		if err != nil {
			glyph = 0
		}
		advance, err := f.font.GlyphAdvance(&f.buffer, glyph, f.em, font.HintingNone)
		if err == nil {
			sum += advance
		}
	}
	return float64(sum) / float64(f.em) * points
}

// Wrap breaks words into lines of a width, as a page does; a word that is wider is broken
// where the line ends. Lines of nothing are one empty line.
func (f *Face) Wrap(words string, points, width float64) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(words) {
		with := word
		if line != "" {
			with = line + " " + word
		}
		if f.Width(with, points) <= width {
			line = with
			continue
		}
		if line != "" {
			lines = append(lines, line)
		}
		for f.Width(word, points) > width {
			head := f.head(word, points, width)
			if head == word {
				break
			}
			lines, word = append(lines, head), word[len(head):]
		}
		line = word
	}
	return append(lines, line)
}

// head is as much of a word as fits, a character at least.
func (f *Face) head(word string, points, width float64) string {
	end := 0
	for i, r := range word {
		next := i + len(string(r))
		if end > 0 && f.Width(word[:next], points) > width {
			break
		}
		end = next
	}
	return word[:end]
}

// Fit shortens words to a width, with an ellipsis where something is left out.
func (f *Face) Fit(words string, points, width float64) string {
	if f.Width(words, points) <= width {
		return words
	}
	for words != "" {
		runes := []rune(words)
		words = string(runes[:len(runes)-1])
		if short := strings.TrimRight(words, " ,;") + "…"; f.Width(short, points) <= width {
			return short
		}
	}
	return ""
}
