package plan_test

import (
	"context"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/plan"
)

// The airmass and the hours of both demos against astropy. The planner's
// airmass knows refraction and a curved atmosphere, astropy's secant does not;
// below 1.2 they differ by less than 0.001.
func TestCrosscheckNights(t *testing.T) {
	var dirs []string
	var summaries []*plan.Summary
	for _, names := range [][2]string{{"demo", "optical"}, {"demo-infrared", "infrared"}} {
		dir := filepath.Join(t.TempDir(), "sequence")
		summary, err := plan.Run(context.Background(), plan.Options{Target: names[0], Profile: names[1], Out: dir})
		require.NoError(t, err)
		dirs, summaries = append(dirs, dir), append(summaries, summary)
	}
	lines := strings.Fields(outside.Python(t, "plan_airmass.py", dirs...))
	require.Len(t, lines, 6)
	for i, s := range summaries {
		var want [3]float64
		for k := range want {
			x, err := strconv.ParseFloat(lines[3*i+k], 64)
			require.NoError(t, err)
			want[k] = x
		}
		t.Logf("airmass %.4f to %.4f, astropy %.4f to %.4f", s.Airmass[0], s.Airmass[1], want[0], want[1])
		require.InDelta(t, want[0], s.Airmass[0], 0.002)
		require.InDelta(t, want[1], s.Airmass[1], 0.002)
		require.Less(t, s.Airmass[2], 1.2)
		require.InDelta(t, want[2], s.Minutes, 1e-9)
	}
}

// The bytes of a plan do not depend on the processors.
func TestRunGivesTheSameBytesOnAnyProcessors(t *testing.T) {
	before := runtime.GOMAXPROCS(0)
	defer runtime.GOMAXPROCS(before)
	var want *plan.Summary
	for _, processors := range []int{1, 2, 5} {
		runtime.GOMAXPROCS(processors)
		summary, err := plan.Run(context.Background(), plan.Options{Target: "demo", Profile: "optical", Out: filepath.Join(t.TempDir(), "sequence")})
		require.NoError(t, err)
		if want == nil {
			want = summary
		}
		require.Equal(t, want, summary)
	}
}
