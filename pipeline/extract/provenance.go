package extract

import (
	"fmt"
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/version"
)

// card is a keyword to write.
type card struct {
	key     string
	value   any
	comment string
}

// primary is the primary header of a product: what the cube says of itself, which
// cube it was, and further cards.
func (c *Cube) primary(more ...card) (*fitsutil.Header, error) {
	h := fitsutil.NewHeader()
	from := c.file.HDUs()[0].Header
	cards := []card{}
	for _, k := range []struct{ key, comment string }{
		{"OBJECT", "target"}, {"PROFNAME", "instrument profile"}, {"PROFSHA", "SHA-256 of the profile"},
		{"SEQSHA", "SHA-256 of the sequence"}, {"RECSHA", "SHA-256 of the recipe"},
	} {
		if text, err := from.Str(k.key); err == nil {
			cards = append(cards, card{k.key, text, k.comment})
		}
	}
	if c.Frame.Name != product.Topocentric {
		cards = append(cards, card{"SPECSYS", string(c.Frame.Name), "standard of rest of the wavelengths"})
		if c.observed {
			cards = append(cards, card{observerVelocity, c.Frame.VelocityMS(), "[m/s] observer's recession from the target"})
		}
	}
	if c.members != nil {
		cards = append(cards, card{runsCard, len(c.members), "runs combined, taken to be independent"})
	}
	cards = append(cards,
		card{"SOFTVERS", "mirrorloom " + version.Version, "software that made this file"},
		card{"CUBESHA", c.SHA, "SHA-256 of the headers of the cube"})
	return h, set(h, append(cards, more...))
}

// set writes cards; a value that is not a number or infinite is left out.
func set(h *fitsutil.Header, cards []card) error {
	for _, k := range cards {
		if x, ok := k.value.(float64); ok && (math.IsNaN(x) || math.IsInf(x, 0)) {
			continue
		}
		if err := h.Set(k.key, k.value, k.comment); err != nil {
			return fmt.Errorf("header of a product: %w", err)
		}
	}
	return nil
}

// squared is the unit of a variance in unit.
func squared(unit string) string {
	if unit == "ct" {
		return "ct2"
	}
	return "(" + unit + ")2"
}
