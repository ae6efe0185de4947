package report_test

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/report"
)

// Rehearsed nights whose answer is known beforehand, since what was done to them is.
func TestVerdictOfNights(t *testing.T) {
	f, err := trial.Lamps()
	require.NoError(t, err)
	n, err := f.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	for _, c := range []struct {
		name   string
		faults []string
		trust  report.Trust
		says   string
	}{
		{"clean", nil, report.TrustYes, "decode to zero within their errors"},
		{"drifting", []string{"drift=0.05"}, report.TrustYes, "that was measured and corrected"},
		{"lost", []string{"lost=3"}, report.TrustYes, "3 frames were lost and restored"},
		{"gone", []string{"lost=30"}, report.TrustNo, "30 of 63 frames are missing"},
		{"ruined", []string{"stale=30"}, report.TrustNo, "which frame shows which mask cannot be told"},
		{"flipped", []string{"flip"}, report.TrustNo, "Wavelengths were not measured"},
	} {
		t.Run(c.name, func(t *testing.T) {
			var faults []rehearse.Fault
			for _, text := range c.faults {
				fault, err := rehearse.ParseFault(text)
				require.NoError(t, err)
				faults = append(faults, fault)
			}
			defer func() { require.NoError(t, n.Discard(c.name)) }()
			result, err := n.Make(t.Context(), c.name, rehearse.Options{Seed: 5, Faults: faults, NoTruth: true})
			require.NoError(t, err)
			v := report.Judge(result.Run, result.Ledger)
			require.Equal(t, c.trust, v.Trust, "%+v", v)
			require.Contains(t, strings.Join(v.Reasons, "\n"), c.says)

			// What is read back is judged alike, and the page says so.
			run, err := product.ReadRun(filepath.Join(n.Run(c.name), product.RunFile))
			require.NoError(t, err)
			ledger, err := product.ReadLedger(filepath.Join(n.Run(c.name), product.LedgerFile))
			require.NoError(t, err)
			require.Equal(t, v, report.Judge(run, ledger))
			page, err := os.ReadFile(filepath.Join(n.Run(c.name), product.ReportFile))
			require.NoError(t, err)
			require.True(t, strings.Contains(string(page), "<span>"+v.Headline+"</span>"))
			require.Less(t, len(page), 3<<20)
		})
	}
}
