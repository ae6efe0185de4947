package instrument

// Section is a rectangle of a raw frame: x1, x2, y1, y2, FITS pixels from 1,
// inclusive.
type Section [4]int

// Width is the number of columns.
func (s Section) Width() int { return s[1] - s[0] + 1 }

// Height is the number of rows.
func (s Section) Height() int { return s[3] - s[2] + 1 }

// Bounds0 returns the half-open rectangle from 0 that Go code loops over:
// raw columns x0 <= x < x1, raw rows y0 <= y < y1.
func (s Section) Bounds0() (x0, x1, y0, y1 int) { return s[0] - 1, s[1], s[2] - 1, s[3] }

func (s Section) overlaps(o Section) bool {
	return s[0] <= o[1] && o[0] <= s[1] && s[2] <= o[3] && o[2] <= s[3]
}

// Overscan is a Section or, for an amplifier without overscan, empty.
type Overscan []int

// Section returns the rectangle; ok is false where there is none.
func (o Overscan) Section() (s Section, ok bool) {
	if len(o) != len(s) {
		return s, false
	}
	copy(s[:], o)
	return s, true
}

// RawColumns is NAXIS1 of a raw frame: the largest x2 of all sections.
func (d *Detector) RawColumns() int { return d.largest(1) }

// RawRows is NAXIS2 of a raw frame: the largest y2 of all sections.
func (d *Detector) RawRows() int { return d.largest(3) }

func (d *Detector) largest(side int) int {
	most := 0
	for _, a := range d.Amplifiers {
		most = max(most, a.Data[side])
		if s, ok := a.Overscan.Section(); ok {
			most = max(most, s[side])
		}
	}
	return most
}

// Placement says where an amplifier's data lie among the active pixels: raw
// pixel (Raw[0]+i, Raw[2]+k), from 1, is active pixel (X0+i, Y0+k), from 0.
type Placement struct {
	Raw    Section
	X0, Y0 int
}

// Active returns the placement of every amplifier in the order of the profile:
// raw columns and rows that no data section covers (overscan) are closed up.
func (d *Detector) Active() []Placement {
	places := make([]Placement, len(d.Amplifiers))
	for i, a := range d.Amplifiers {
		places[i] = Placement{
			Raw: a.Data,
			X0:  d.coveredBefore(a.Data[0], 0),
			Y0:  d.coveredBefore(a.Data[2], 2),
		}
	}
	return places
}

// coveredBefore counts the raw columns (axis 0) or rows (axis 2) before `at`
// that some data section covers.
func (d *Detector) coveredBefore(at, axis int) int {
	count := 0
	for next := 1; next < at; {
		end := 0 // the last position reached from next without a gap
		start := at
		for _, a := range d.Amplifiers {
			first, last := a.Data[axis], a.Data[axis+1]
			if first <= next && last >= next {
				end = max(end, last)
			} else if first > next {
				start = min(start, first)
			}
		}
		if end == 0 { // a gap: go to where the next section starts
			next = start
			continue
		}
		end = min(end, at-1)
		count += end - next + 1
		next = end + 1
	}
	return count
}
