package report

import (
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

func TestLook(t *testing.T) {
	dir := os.Getenv("LOOK")
	if dir == "" {
		t.Skip()
	}
	run, err := product.ReadRun(filepath.Join(dir, "run.json"))
	require.NoError(t, err)
	ledger, err := product.ReadLedger(filepath.Join(dir, "ledger.csv"))
	require.NoError(t, err)
	f, err := fitsutil.Open(filepath.Join(dir, "cube.fits"))
	require.NoError(t, err)
	im, err := f.ImageNamed("SIGNAL")
	require.NoError(t, err)
	s, err := product.ReadSchema(im.Header, im.Axes)
	require.NoError(t, err)
	in := Input{Run: run, Ledger: ledger, Schema: s, Profile: "optical"}
	if run.Exit == 3 {
		in.Degraded = run.Warnings
	}
	start := time.Now()
	require.NoError(t, Write(t.Context(), dir, in))
	t.Log(time.Since(start), Judge(run, ledger))
}
