package product

import (
	"fmt"
	"os"
	"testing"

	"github.com/stretchr/testify/require"
)

// README.md explains every flag in the words of the code.
func TestFlagsAreExplained(t *testing.T) {
	text, err := os.ReadFile("../../README.md")
	require.NoError(t, err)
	for _, f := range Flags() {
		require.Contains(t, string(text), fmt.Sprintf("\n| %s | %d | %s |\n", f.Name, f.Bit, f.Says))
	}
}
