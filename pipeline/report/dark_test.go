package report

import (
	"encoding/xml"
	"io"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

func TestDarkFacts(t *testing.T) {
	at := func(x float64) *float64 { return &x }
	require.Empty(t, darkFacts(product.Quality{}))
	q := product.Quality{
		RestoredGrowth: at(1.034), ResidualLight: product.ByDark,
		ErrorScale: &product.ErrorScale{Mean: 1.02, Max: 31.4, Applied: 0.043},
		DarkChi2Steps: []product.StepChi2{
			{Step: 3, Chi2: at(1.1)}, {Step: 4}, {Step: 5, Chi2: at(9.25)}, {Step: 6, Chi2: at(0.9)}, {Step: 7, Chi2: at(1.2)}, {Step: 8, Chi2: at(1)}, {Step: 9, Chi2: at(0.5)},
		},
	}
	var text []string
	for _, f := range darkFacts(q) {
		text = append(text, f.Value)
	}
	require.Equal(t, []string{
		"1.03 times", "dark columns", "mean 1.020, most 31.4; VARIANCE is multiplied by it in 4.30 % of the pixels",
		"step 5: 9.25, step 7: 1.20, step 3: 1.10, step 8: 1.00, step 6: 0.90",
	}, text)
}

// The map is well-formed and has a cell for each stretch that was measured.
func TestDrawScale(t *testing.T) {
	at := func(x float64) *float64 { return &x }
	require.Empty(t, drawScale(nil, 0, 0))
	require.Empty(t, drawScale(&product.ErrorScale{}, 0, 0))
	text := string(drawScale(&product.ErrorScale{Map: [][]*float64{{at(1), nil, at(40)}, {at(0.9), at(2), nil}}}, 300, 200))
	require.Equal(t, 4, strings.Count(text, "<title>"))
	require.Contains(t, text, `fill="#050505"><title>40`)
	require.Contains(t, text, `fill="#fafafa"><title>0.9`)
	require.Equal(t, 2, strings.Count(text, `class="hatch"`))
	d := xml.NewDecoder(strings.NewReader(text))
	for {
		if _, err := d.Token(); err == io.EOF {
			break
		} else {
			require.NoError(t, err)
		}
	}
}
