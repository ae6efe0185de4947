package plan

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"mirrorloom/pipeline/trade"
)

// The files of a comparison, in the sequence's folder. They are for people: no later command
// reads them.
const (
	tradeCSV  = "trade.csv"
	tradePlot = "trade.svg"
)

// writeTrade writes a comparison as table and plot; nothing of none.
func writeTrade(dir string, t *trade.Trade) error {
	if t == nil {
		return nil
	}
	for _, f := range []struct {
		name  string
		write func(io.Writer) error
	}{{tradeCSV, t.WriteCSV}, {tradePlot, t.WritePlot}} {
		var b bytes.Buffer
		if err := f.write(&b); err != nil {
			return err
		}
		if err := os.WriteFile(filepath.Join(dir, f.name), b.Bytes(), 0o644); err != nil {
			return fmt.Errorf("writing the comparison: %w", err)
		}
	}
	return nil
}
