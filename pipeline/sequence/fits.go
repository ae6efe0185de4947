package sequence

import "mirrorloom/fitsutil"

// Names of the files and folders of a sequence.
const (
	fitsFile    = "sequence.fits"
	profileFile = "profile.yaml"
	targetFile  = "target.yaml"
	maskFolder  = "masks"
	maskSuffix  = ".png"
)

// writeFITS writes sequence.fits.
func (s *Sequence) writeFITS(path string) error {
	primary := fitsutil.NewHeader(
		fitsutil.Card{Key: "FAMILY", Value: s.Family, Comment: "family of the code"},
		fitsutil.Card{Key: "CODEV", Value: int64(s.V), Comment: "code columns, steps of a cycle"},
		fitsutil.Card{Key: "CODEK", Value: int64(s.K), Comment: "open columns of a code row"},
		fitsutil.Card{Key: "CODEL", Value: int64(s.L), Comment: "open columns two code rows share"},
		fitsutil.Card{Key: "CODEPOLY", Value: int64(s.Poly), Comment: "m-sequence: polynomial bits; singer: in base p"},
		fitsutil.Card{Key: "ORDSEED", Value: int64(s.OrderSeed), Comment: "seed of the order of science steps"},
		fitsutil.Card{Key: "PROFNAME", Value: s.ProfileName, Comment: "instrument profile"},
		fitsutil.Card{Key: "PROFSHA", Value: s.ProfileSHA},
		fitsutil.Card{Key: "TARGSHA", Value: s.TargetSHA},
	)
	return fitsutil.WriteFile(path, primary, s.stepsTable(), s.codeImage(), s.elementsTable(), s.rowsTable())
}

func (s *Sequence) stepsTable() *fitsutil.Table {
	n := len(s.Steps)
	step, row, cycle := make([]int32, n), make([]int32, n), make([]int32, n)
	kind, lamp, maskID := make([]string, n), make([]string, n), make([]string, n)
	exptime := make([]float64, n)
	for i, st := range s.Steps {
		step[i], row[i], cycle[i] = int32(st.Step), int32(st.Row), int32(st.Cycle)
		kind[i], lamp[i], maskID[i] = string(st.Kind), st.Lamp, st.MaskID
		exptime[i] = st.ExptimeSeconds
	}
	return &fitsutil.Table{Name: "STEPS", Columns: []fitsutil.Column{
		{Name: "STEP", Format: "J", Data: step},
		{Name: "KIND", Format: "8A", Data: kind},
		{Name: "LAMP", Format: "8A", Data: lamp},
		{Name: "EXPTIME", Format: "D", Unit: "s", Data: exptime},
		{Name: "MASKID", Format: "16A", Data: maskID},
		{Name: "ROW", Format: "J", Data: row},
		{Name: "CYCLE", Format: "J", Data: cycle},
	}}
}

func (s *Sequence) codeImage() *fitsutil.ImageData {
	bits := make([]uint8, 0, s.V*len(s.Code))
	for _, row := range s.Code {
		bits = append(bits, row...)
	}
	return &fitsutil.ImageData{Name: "CODE", Axes: []int{s.V, len(s.Code)}, Data: bits}
}

func (s *Sequence) elementsTable() *fitsutil.Table {
	n := len(s.Elements)
	column, element, first, last := make([]int32, n), make([]int32, n), make([]int32, n), make([]int32, n)
	dark := make([]bool, n)
	for i, e := range s.Elements {
		column[i], element[i] = int32(e.Column), int32(e.Element)
		first[i], last[i], dark[i] = int32(e.First), int32(e.Last), e.Dark
	}
	return &fitsutil.Table{Name: "ELEMENTS", Columns: []fitsutil.Column{
		{Name: "COLUMN", Format: "J", Data: column},
		{Name: "ELEMENT", Format: "J", Data: element},
		{Name: "FIRST", Format: "J", Data: first},
		{Name: "LAST", Format: "J", Data: last},
		{Name: "DARK", Format: "L", Data: dark},
	}}
}

func (s *Sequence) rowsTable() *fitsutil.Table {
	n := len(s.Rows)
	first, last, element := make([]int32, n), make([]int32, n), make([]int32, n)
	use := make([]string, n)
	for i, r := range s.Rows {
		first[i], last[i], element[i], use[i] = int32(r.First), int32(r.Last), int32(r.Element), r.Use
	}
	return &fitsutil.Table{Name: "ROWS", Columns: []fitsutil.Column{
		{Name: "FIRST", Format: "J", Data: first},
		{Name: "LAST", Format: "J", Data: last},
		{Name: "USE", Format: "8A", Data: use},
		{Name: "ELEMENT", Format: "J", Data: element},
	}}
}
