package reduce_test

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
)

// Where read noise is all, a code gains (v+1)/(2 sqrt v) over a slit scan in the
// same time, n/v of it with dark columns: both nights are rehearsed and reduced by
// the same code. `make validate` does v = 127, g = 0 as well.
func TestReadNoiseGain(t *testing.T) {
	for _, c := range []struct{ v, dark int }{{31, 0}, {31, 8}, {127, 16}} {
		t.Run(fmt.Sprintf("v=%d,g=%d", c.v, c.dark), func(t *testing.T) {
			g, err := trial.MeasureGain(context.Background(), t.TempDir(), c.v, c.dark, uint64(100*c.v+c.dark))
			require.NoError(t, err)
			hold(t, append(g.PullFindings(), g.Finding()))
		})
	}
}
