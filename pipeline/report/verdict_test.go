package report

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

func at(x float64) *float64 { return &x }

func TestJudge(t *testing.T) {
	for _, c := range []struct {
		name     string
		exit     int
		chi2     *float64
		headline string
		said     string // in one of the sentences
	}{
		{"clean", 0, at(1.02), "The cube is whole and its errors hold.", "do so within the errors (chi-square 1.020"},
		{"without dark columns", 0, nil, "The cube is whole; its errors were not checked.", "no dark columns"},
		// 283 is what the design measured on a night that drifted: sqrt = 16.8.
		{"drifted", 0, at(283), "The cube is whole, but its errors are too small.", "take the errors as 17 times"},
		{"too large errors", 0, at(0.8), "The cube is whole; its errors are too large.", "check gain and read noise"},
		{"degraded", 3, at(1), "The cube was written, but it is not whole.", "within the errors"},
	} {
		in := Input{Run: &product.Run{Exit: c.exit, Quality: product.Quality{DarkChi2Heldout: c.chi2}}}
		v := judge(in, "cube")
		require.Equal(t, c.headline, v.Headline, c.name)
		require.Contains(t, strings.Join(v.Trust, "\n"), c.said, c.name)
		require.Equal(t, c.exit == 0, v.Whole)
	}
}

func TestExitSentence(t *testing.T) {
	in := Input{Run: &product.Run{Exit: 3, Warnings: []string{"two frames drift", "all is odd"}}, Degraded: []string{"two frames drift", "an arc is missing"}}
	require.Equal(t, "Exit code 3: the product was written, but two frames drift; an arc is missing.", exitSentence(in))
	require.Equal(t, []string{"Two frames drift.", "An arc is missing.", "All is odd."}, judge(in, "cube").Look)
	require.Equal(t, "Exit code 3: the product was written, but see the warnings.", exitSentence(Input{Run: &product.Run{Exit: 3}}))
	require.Equal(t, "Exit code 0: nothing is missing.", exitSentence(Input{Run: &product.Run{}}))
}

func TestFramesSentence(t *testing.T) {
	ledger := func(lacking ...int) product.Ledger {
		var l product.Ledger
		for step := 1; step <= 40; step++ {
			e := product.NewEntry(step)
			e.Kind, e.Verdict = "science", product.OK
			for _, s := range lacking {
				if s == step {
					e.Verdict = product.Missing
				}
			}
			l = append(l, e)
		}
		bias := product.NewEntry(41)
		bias.Kind, bias.Verdict = "bias", product.Missing
		return append(l, bias)
	}
	require.Equal(t, "All 40 science steps have their frame.", framesSentence(ledger()))
	require.Equal(t, "39 of 40 science steps have their frame; lacking is step 7.", framesSentence(ledger(7)))
	require.Equal(t, "35 of 40 science steps have their frame; lacking are the steps 1, 3 to 5, 40.", framesSentence(ledger(1, 3, 4, 5, 40)))
	var odd []int
	for s := 1; s < 40; s += 2 {
		odd = append(odd, s)
	}
	require.True(t, strings.HasSuffix(framesSentence(ledger(odd...)), "21, 23, and more."))
}

func TestSentence(t *testing.T) {
	for in, want := range map[string]string{"": "", "a": "A.", "3 frames": "3 frames.", "Done!": "Done!", "ärger": "Ärger.", " why? ": "Why?"} {
		require.Equal(t, want, sentence(in))
	}
}
