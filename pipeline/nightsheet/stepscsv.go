package nightsheet

import (
	"encoding/csv"
	"fmt"
	"io"
	"path"
	"strconv"
)

// stepColumns are those of steps.csv. mask_file is in the sequence's folder; code_row is -1 of
// a step that shows no code, cycle 0.
var stepColumns = []string{"step", "start_utc", "kind", "lamp", "exptime_s", "mask_file", "cycle", "code_row"}

// WriteSteps writes steps.csv: a header line, then the steps in their order.
func (s *Sheet) WriteSteps(w io.Writer) error {
	rows := [][]string{stepColumns}
	for _, st := range s.Steps {
		rows = append(rows, []string{
			strconv.Itoa(st.Step), st.StartUTC, string(st.Kind), st.Lamp, strconv.FormatFloat(st.Dwell, 'g', -1, 64),
			path.Join(s.Loading.Folder, st.MaskID+".png"), strconv.Itoa(st.Cycle), strconv.Itoa(st.CodeRow),
		})
	}
	if err := csv.NewWriter(w).WriteAll(rows); err != nil {
		return fmt.Errorf("%s: %w", StepsFile, err)
	}
	return nil
}
