package rehearse

// The layers of a light: what has to be kept apart because faults weigh it
// differently.
const (
	// layerMain is all of the light.
	layerMain = iota
	// layerColour is the light times its place in the band, -1/2..1/2 over the
	// grid.
	layerColour
	// layerLines is the sky's lines alone.
	layerLines
	// layerNeighbour is the light times d(L).
	layerNeighbour
	layers
)

// mixture says how a step adds up the beams.
type mixture struct {
	// open lists the beams that are on, shut the others that leak.
	open, shut []int
	// neighbours[i] is how many neighbours of open[i] are on, 0 to 2; nil where
	// they do not matter.
	neighbours []float64
	colour     float64 // weight of layerColour
	lines      float64 // weight of layerLines: the sky lines' factor less 1
}

// rowsOf holds the rows of all beams by layer; a nil row is dark.
type rowsOf[T float32 | float64] [layers][][]T

// mix writes the sum of a step's beams: open ones whole, shut ones by what they
// leak (by beam).
func mix[T float32 | float64](dst []float64, m *mixture, rows *rowsOf[T], leak []float64) {
	clear(dst)
	addAll(dst, rows[layerMain], m.open)
	for i, b := range m.open {
		addTimes(dst, rows[layerColour], b, m.colour)
		addTimes(dst, rows[layerLines], b, m.lines)
		if m.neighbours != nil {
			addTimes(dst, rows[layerNeighbour], b, m.neighbours[i]/2)
		}
	}
	for _, b := range m.shut {
		addTimes(dst, rows[layerMain], b, leak[b])
		addTimes(dst, rows[layerColour], b, leak[b]*m.colour)
		addTimes(dst, rows[layerLines], b, leak[b]*m.lines)
	}
}

func addTimes[T float32 | float64](dst []float64, rows [][]T, beam int, weight float64) {
	if rows == nil || rows[beam] == nil || weight == 0 {
		return
	}
	row := rows[beam][:len(dst)]
	for x := range dst {
		dst[x] += weight * float64(row[x])
	}
}

// addAll adds the rows of the beams listed, four at a time: the order of the
// additions depends on the list alone.
func addAll[T float32 | float64](dst []float64, rows [][]T, list []int) {
	var four [4][]T
	n := 0
	for _, b := range list {
		if rows[b] == nil {
			continue
		}
		four[n] = rows[b][:len(dst)]
		if n++; n == len(four) {
			a, b, c, d := four[0], four[1], four[2], four[3]
			for x := range dst {
				dst[x] += (float64(a[x]) + float64(b[x])) + (float64(c[x]) + float64(d[x]))
			}
			n = 0
		}
	}
	for _, row := range four[:n] {
		for x := range dst {
			dst[x] += float64(row[x])
		}
	}
}

// newMixture works out a step's mixture.
func (b *beams) newMixture(open []bool, leaks, neighbours bool) *mixture {
	m := &mixture{}
	for i, on := range open {
		switch {
		case on:
			m.open = append(m.open, i)
			if neighbours {
				m.neighbours = append(m.neighbours, b.openNeighbours(open, i))
			}
		case leaks:
			m.shut = append(m.shut, i)
		}
	}
	return m
}

// openNeighbours counts the neighbours of an open beam that are open.
func (b *beams) openNeighbours(open []bool, i int) float64 {
	count := 0.0
	element := b.list[i].element
	if element > 0 && open[i-1] {
		count++
	}
	if element >= 0 && element < b.n-1 && open[i+1] {
		count++
	}
	return count
}
