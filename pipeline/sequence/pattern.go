package sequence

// Pattern names what the elements of a step show together.
type Pattern int

// The patterns. A lamp's all-even mask has the elements j = 0, 2, 4 ... on.
const (
	PatternOther  Pattern = iota
	PatternRow            // a code row
	PatternOff            // no element
	PatternOn             // every element
	PatternEven           // the elements of even j
	PatternOdd            // the elements of odd j
	PatternSingle         // one element
	PatternWide           // neighbouring elements, all open, in a refstar step
)

// Pattern tells what Steps[i] shows. The second result is the code row of
// PatternRow, the element of PatternSingle, the first one of PatternWide, -1 otherwise. With two elements or
// fewer an even or odd mask is a single element too: an arc then counts as
// PatternSingle, any other kind as PatternEven or PatternOdd.
func (s *Sequence) Pattern(i int) (Pattern, int) {
	if row := s.Steps[i].Row; row >= 0 {
		return PatternRow, row
	}
	if s.Steps[i].Kind == RefStar {
		if first, _, ok := s.WideElement(i); ok {
			return PatternWide, first
		}
		return PatternOther, -1
	}
	on, first, parity := 0, -1, [2]int{}
	columns := s.ElementColumns()
	for j, column := range columns {
		if s.Code[i][column] == 0 {
			continue
		}
		on++
		parity[j%2]++
		if first < 0 {
			first = j
		}
	}
	n := len(columns)
	switch {
	case on == 0:
		return PatternOff, -1
	case on == n && n > 1:
		return PatternOn, -1
	case on == 1 && (s.Steps[i].Kind == Arc || n > 3):
		return PatternSingle, first
	case parity == [2]int{(n + 1) / 2, 0}:
		return PatternEven, -1
	case parity == [2]int{0, n / 2}:
		return PatternOdd, -1
	case on == 1:
		return PatternSingle, first
	}
	return PatternOther, -1
}

// WideElement gives the first and the last element that Steps[i] opens; ok is false
// where it opens none, or leaves one between them closed.
func (s *Sequence) WideElement(i int) (first, last int, ok bool) {
	first, last = -1, -1
	on := 0
	for j, column := range s.ElementColumns() {
		if s.Code[i][column] == 0 {
			continue
		}
		on++
		if first < 0 {
			first = j
		}
		last = j
	}
	return first, last, on > 0 && on == last-first+1
}
