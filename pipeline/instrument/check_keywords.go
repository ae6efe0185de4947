package instrument

import (
	"regexp"
	"strings"

	"mirrorloom/pipeline/config"
)

// keyword is the FITS standard's form of a keyword (4.0, section 4.1.2.1).
var keyword = regexp.MustCompile(`^[A-Z0-9_-]{1,8}$`)

// pair is a key of a map and the word that frames have for it.
type pair struct{ key, word string }

func (k Keywords) pairs() []pair {
	return []pair{
		{"step", k.Step}, {"maskid", k.MaskID}, {"kind", k.Kind}, {"exptime", k.Exptime}, {"date_obs", k.DateObs},
		{"airmass", k.Airmass}, {"ra", k.RA}, {"dec", k.Dec}, {"rotang", k.RotAng}, {"instrume", k.Instrume},
	}
}

func (k Keywords) check(c *config.Checks) {
	for _, p := range k.pairs() {
		c.That(keyword.MatchString(p.word), "keywords."+p.key, "%q is no FITS keyword; write 1 to 8 capital letters, digits, hyphens or underscores", p.word)
	}
	checkDistinct(c, "keywords.", k.pairs())
}

func (k Kinds) pairs() []pair {
	return []pair{
		{"bias", k.Bias}, {"dark", k.Dark}, {"flat", k.Flat}, {"arc", k.Arc},
		{"all-on", k.AllOn}, {"all-off", k.AllOff}, {"science", k.Science}, {"refstar", k.RefStar},
	}
}

// Word returns the word that frames carry for a kind, such as "science"; ok is
// false for a kind that there is not.
func (k Kinds) Word(kind string) (word string, ok bool) {
	for _, p := range k.pairs() {
		if p.key == kind {
			return p.word, true
		}
	}
	return "", false
}

// Kind is the inverse of Word; ok is false for a word that means no kind.
func (k Kinds) Kind(word string) (kind string, ok bool) {
	for _, p := range k.pairs() {
		if p.word == word {
			return p.key, true
		}
	}
	return "", false
}

// maxKeywordValue is the longest string that fits one FITS card.
const maxKeywordValue = 68

func (k Kinds) check(c *config.Checks) {
	for _, p := range k.pairs() {
		good := p.word != "" && len(p.word) <= maxKeywordValue && strings.TrimSpace(p.word) == p.word &&
			!strings.ContainsFunc(p.word, func(r rune) bool { return r < ' ' || r > '~' })
		c.That(good, "kinds."+p.key, "%q is no word of a FITS header; write 1 to %d printable ASCII characters without spaces at the ends", p.word, maxKeywordValue)
	}
	checkDistinct(c, "kinds.", k.pairs())
}

func checkDistinct(c *config.Checks, prefix string, pairs []pair) {
	for i, later := range pairs {
		for _, earlier := range pairs[:i] {
			c.That(later.word != earlier.word, prefix+later.key, "%q is %s as well; give each its own", later.word, prefix+earlier.key)
		}
	}
}
