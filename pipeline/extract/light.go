package extract

import (
	"context"
	"math"
	"runtime"

	"mirrorloom/calib"
	"mirrorloom/pipeline/parallel"
)

// lightReader rebuilds from the cube the light of all elements at the detector's
// pixels. It is for variances: it interpolates linearly between voxels and rows.
type lightReader struct {
	c *Cube
	// electrons turns the cube's unit into detected electrons, [wavelength]; nil for 1.
	electrons []float64
	// chunk holds rows chunkRow... of each plane, [wavelength][row][element]; of a shifted
	// field two rows more, and each plane's from where its light of chunkRow went.
	chunk     []float32
	chunkRow  int
	chunkRows int
	traces    map[int][][]float32 // by trace row: [element][column]
	places    *calib.RowPlaces    // of the voxels' centres
}

// chunkBytes of SIGNAL are read at a time.
const chunkBytes = 24 << 20

// mostChunkRows: more would read rows that an aperture of a few does not need.
const mostChunkRows = 16

func (c *Cube) newLightReader(electrons []float64) *lightReader {
	rows := min(max(chunkBytes/(4*c.Elements*c.Grid.Count), 1), mostChunkRows)
	return &lightReader{c: c, electrons: electrons, chunkRow: -1, chunkRows: rows, traces: map[int][][]float32{},
		places: calib.NewRowPlaces(c.geometry, c.Elements, c.centres)}
}

// row is the light of detector row y, [element][column], electrons of a science
// exposure. Rows are to be asked for in ascending order.
func (r *lightReader) row(y int) ([][]float32, error) {
	c := r.c
	first, last := c.Rows, -1
	below := make([]int, c.noise.Columns)
	part := make([]float32, c.noise.Columns)
	for x := range below {
		at := float64(y) - c.geometry.TraceShift(float64(x))
		at = min(max(at, 0), float64(c.Rows-1))
		below[x] = min(int(at), max(c.Rows-2, 0))
		part[x] = float32(at - float64(below[x]))
		first, last = min(first, below[x]), max(last, below[x]+1)
	}
	for y0 := range r.traces {
		if y0 < first {
			delete(r.traces, y0)
		}
	}
	for y0 := first; y0 <= last; y0++ {
		if err := r.trace(y0); err != nil {
			return nil, err
		}
	}
	light := table[float32](c.Elements, c.noise.Columns)
	for from, to := 0, 0; from < len(below); from = to {
		for to < len(below) && below[to] == below[from] {
			to++
		}
		lower, upper := r.traces[below[from]], r.traces[below[from]+1]
		for j, row := range light {
			a, b := lower[j], upper[j]
			for x := from; x < to; x++ {
				row[x] = (1-part[x])*a[x] + part[x]*b[x]
			}
		}
	}
	return light, nil
}

// some is all of it: the images give no less.
func (r *lightReader) some(y int, _ []int) (*rowLight, error) {
	all, err := r.row(y)
	if err != nil {
		return nil, err
	}
	l := &rowLight{of: all}
	l.total, l.shared = r.c.addUp(all)
	return l, nil
}

// trace fills in the light of a trace row.
func (r *lightReader) trace(y0 int) error {
	if r.traces[y0] != nil {
		return nil
	}
	if err := r.load(y0); err != nil {
		return err
	}
	c := r.c
	slit, err := c.slitRows(y0)
	if err != nil {
		return err
	}
	light := table[float32](c.Elements, c.noise.Columns)
	workers := runtime.GOMAXPROCS(0)
	memory := table[float64](2*workers, c.Grid.Count)
	r.places.SetRow(float64(y0))
	r.traces[y0] = light
	return parallel.Do(context.Background(), workers, c.Elements, func(worker, j int) error {
		values, places := memory[2*worker], memory[2*worker+1]
		for l := range values {
			v := r.voxel(j, y0, l)
			if r.electrons != nil {
				v *= r.electrons[l]
			}
			values[l] = v * c.responseOf(slit, j, l)
			if math.IsNaN(values[l]) {
				values[l] = 0 // no data: as good as no light
			}
		}
		r.places.Places(places, float64(j))
		spread(light[j], values, places)
		return nil
	})
}

// beyond the first and last voxel their light is taken to go on for so many columns:
// as many as the voxels' own weights reach.
const beyond = 8

// spread turns voxels, whose centres lie at places in detector columns, rising or
// falling, into light per column.
func spread(dst []float32, values, places []float64) {
	n := len(places)
	if n < 2 {
		return
	}
	for l := 0; l+1 < n; l++ {
		a, b, va, vb := places[l], places[l+1], values[l], values[l+1]
		if a > b {
			a, b, va, vb = b, a, vb, va
		}
		wide := b - a
		for x := max(0, int(math.Ceil(a))); x < len(dst) && float64(x) < b; x++ {
			t := (float64(x) - a) / wide
			dst[x] = float32(((1-t)*va + t*vb) / wide)
		}
	}
	for _, end := range [][2]int{{0, 1}, {n - 1, n - 2}} {
		place, inner := places[end[0]], places[end[1]]
		low, high := place, place+beyond
		if place < inner {
			low, high = place-beyond, place
		}
		for x := max(0, int(math.Ceil(low))); x < len(dst) && float64(x) <= high; x++ {
			dst[x] = float32(values[end[0]] / math.Abs(place-inner))
		}
	}
}

// voxel is the cube's light of element j and trace row y0: that of its own voxel, or, of a
// shifted field, what lies where the shift took it, by straight lines between voxels.
// Beyond the cube's ends the last voxel's light is taken to go on.
func (r *lightReader) voxel(j, y0, l int) float64 {
	c := r.c
	if c.field == nil {
		return float64(r.chunk[(l*r.chunkRows+y0-r.chunkRow)*c.Elements+j])
	}
	elements, rows := c.field.Shift(l)
	x := min(max(float64(j)-elements, 0), float64(c.Elements-1))
	y := min(max(float64(y0)-rows, 0), float64(c.Rows-1))
	base, n := r.planeRow(l), r.chunkRows+shiftedRows
	x0, at := min(int(x), c.Elements-2), min(max(int(y)-base, 0), n-2)
	y -= float64(base + at)
	x -= float64(x0)
	sum, weight := 0.0, 0.0
	for _, corner := range [][3]float64{{0, 0, (1 - x) * (1 - y)}, {1, 0, x * (1 - y)}, {0, 1, (1 - x) * y}, {1, 1, x * y}} {
		v := float64(r.chunk[(l*n+at+int(corner[1]))*c.Elements+x0+int(corner[0])])
		if v == v && corner[2] > 0 {
			sum += corner[2] * v
			weight += corner[2]
		}
	}
	if weight == 0 {
		return math.NaN()
	}
	return sum / weight
}

// shiftedRows more are needed of a plane whose rows are shifted by no whole number.
const shiftedRows = 2

// planeRow is the row of the cube with which the chunk of a plane begins.
func (r *lightReader) planeRow(l int) int {
	if r.c.field == nil {
		return r.chunkRow
	}
	_, rows := r.c.field.Shift(l)
	return min(max(r.chunkRow+int(math.Floor(-rows)), 0), max(0, r.c.Rows-r.chunkRows-shiftedRows))
}

// load reads the chunk of rows from y0 on.
func (r *lightReader) load(y0 int) error {
	c := r.c
	if r.chunkRow >= 0 && y0 >= r.chunkRow && y0 < r.chunkRow+r.chunkRows {
		return nil
	}
	more := 0
	if c.field != nil {
		more = shiftedRows
	}
	r.chunkRows = min(r.chunkRows, c.Rows-more)
	r.chunkRow = min(y0, c.Rows-r.chunkRows)
	n := (r.chunkRows + more) * c.Elements
	if r.chunk == nil {
		r.chunk = make([]float32, n*c.Grid.Count)
	}
	for l := range c.Grid.Count {
		from := r.planeRow(l)
		if err := c.signal.ReadPlaneRows(r.chunk[l*n:(l+1)*n], l, from, from+r.chunkRows+more); err != nil {
			return err
		}
		if err := c.onSky.inCounts(r.chunk[l*n:(l+1)*n], l, from, c.Elements); err != nil {
			return err
		}
	}
	return nil
}
