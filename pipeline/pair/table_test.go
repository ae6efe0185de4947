package pair

import (
	"errors"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

func ledgerForPrint() product.Ledger {
	ok, lost, extra := product.NewEntry(1), product.NewEntry(2), product.NewEntry(0)
	ok.File, ok.Kind, ok.MatchedBy, ok.Verdict, ok.ExptimeS = "f00001.fits", "bias", "keyword", product.OK, 0
	lost.Kind, lost.Verdict = "science", product.Missing
	extra.File, extra.Verdict, extra.Note = "g.fits", product.Extra, "of no step"
	return product.Ledger{ok, lost, extra}
}

func TestPrint(t *testing.T) {
	var b strings.Builder
	require.NoError(t, Print(&b, ledgerForPrint(), false))
	require.Equal(t, `2 steps: 1 ok, 1 missing; 1 frame of no step: 1 extra

step  file    kind     matched by  verdict  date-obs  exptime  note
2     -       science  -           missing  -         -
-     g.fits  -        -           extra    -         -        of no step
`, b.String())
	b.Reset()
	require.NoError(t, Print(&b, ledgerForPrint(), true))
	require.Contains(t, b.String(), "1     f00001.fits  bias     keyword     ok       -         0 s\n")
	b.Reset()
	require.NoError(t, Print(&b, ledgerForPrint()[:1], false))
	require.Equal(t, "1 step: 1 ok\n", b.String())
}

type broken struct{}

func (broken) Write([]byte) (int, error) { return 0, errors.New("no paper") }

func TestPrintFails(t *testing.T) {
	require.ErrorContains(t, Print(broken{}, ledgerForPrint(), false), "no paper")
}
