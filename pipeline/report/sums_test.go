package report

import (
	"testing"

	"github.com/stretchr/testify/require"
)

func TestSumsNote(t *testing.T) {
	for _, c := range []struct {
		least, most float64
		want        string
	}{
		{1.02, 1.11, "too small, by up to 11 %"}, {0.9, 0.998, "too large, by up to 10 %"},
		{0.94, 1.07, "too small by up to 7 % of itself, or too large by up to 6 %"}, {0.999, 1.001, "happens to be right"},
	} {
		require.Contains(t, sumsNote(c.least, c.most), c.want)
	}
}
