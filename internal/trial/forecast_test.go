package trial

import (
	"context"
	"fmt"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

func TestScratch(t *testing.T) {
	for i, p := range ForecastPlans() {
		s := time.Now()
		l, b, err := p.MeasureForecast(context.Background(), t.TempDir(), 1, 10)
		require.NoError(t, err)
		fmt.Println(i, time.Since(s), l.Light(), b.Light())
		for _, f := range append(l.Findings(p.Name+", line"), b.Findings(p.Name+", band")...) {
			fmt.Println(f)
		}
	}
}
