package instrument

import (
	"os"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// README.md says of every keyword of frames what it is for, and names every kind.
func TestKeywordsAreExplained(t *testing.T) {
	text, err := os.ReadFile("../../README.md")
	require.NoError(t, err)
	var k Keywords
	k.SetDefaults()
	rows := strings.Split(string(text), "\n")
	for _, p := range k.pairs() {
		if p.key == "ra" || p.key == "dec" { // one row for both
			require.Contains(t, string(text), "\n| ra, dec | RA, DEC |")
			continue
		}
		found := false
		for _, row := range rows {
			found = found || strings.HasPrefix(row, "| "+p.key+" | "+p.word+" | ")
		}
		require.True(t, found, "no row of %s", p.key)
	}
	var kinds Kinds
	kinds.SetDefaults()
	for _, p := range kinds.pairs() {
		require.Contains(t, string(text), p.word)
	}
}
