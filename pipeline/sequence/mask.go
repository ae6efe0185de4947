package sequence

import "mirrorloom/pipeline/instrument"

// Mask is the state of every mirror of the device.
type Mask struct {
	Columns, Rows int
	// On holds one byte a mirror, 1 on and 0 off: the mirror of column x and
	// row y is On[y*Columns+x].
	On []uint8
}

// maskIDDigits is the length of a MASKID: 64 bits keep a night's thousands of
// masks apart and fit a header card and a file name.
const maskIDDigits = 16

// ID is the mask's MASKID: the first 16 hex digits of the SHA-256 of On.
func (m *Mask) ID() string { return digest(m.On)[:maskIDDigits] }

// Mask gives the mirror states of Steps[i]: Code[i] expanded by Elements and
// Rows. The sequence must be consistent, as Read and Write leave it.
func (s *Sequence) Mask(i int) *Mask {
	m := s.newMask()
	s.expander().expand(m.On, s.Code[i], s.Steps[i].Kind == Science)
	return m
}

func (s *Sequence) newMask() *Mask {
	d := s.device()
	return &Mask{Columns: d.columns, Rows: d.rows, On: make([]uint8, d.columns*d.rows)}
}

func (s *Sequence) device() device {
	d := s.Profile.DMD
	return device{columns: d.Columns, rows: d.Rows, diagonal: d.Mounting == instrument.Diagonal}
}

func (s *Sequence) expander() *expander {
	return newExpander(s.device(), s.Elements, s.Rows)
}
