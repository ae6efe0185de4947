package hadamard

const (
	// groupRows is how many rows share one table of subset sums: two tables, of
	// 256 entries of 8 pixels, are 32 KiB, the most that a first-level cache holds.
	groupRows = 8
	subsets   = 1 << groupRows

	// wideLanes is how many pixels are summed together: eight float64 are one
	// cache line and one AVX-512 register.
	wideLanes = 8
)

// wideRow is half a row of a block, in float64.
type wideRow [wideLanes]float64

// subsetTable holds the sums of all subsets of eight rows: bit t of the index
// takes row t.
type subsetTable [subsets]wideRow

// sums are the kernels of sums over rows. They are a seam for instruction sets
// like passes: each does a fixed set of additions per pixel in a fixed order.
type sums struct {
	// tabulate sets the table for eight rows of src, of which those from rows on
	// are zeros, each entry by one addition to the one without its highest row,
	// and adds the sum of all eight to total.
	tabulate func(table *subsetTable, total *wideRow, src []float32, rows, stride int)
	// addSubsets adds to sums[j] entry first[j] of one table, then entry second[j]
	// of the other.
	addSubsets func(sums []wideRow, tables *[2]subsetTable, first, second []uint8)
	// combine writes base + factor*sums[j] to row j of dst, the product rounded
	// before the sum.
	combine func(dst []float32, sums []wideRow, base *wideRow, stride int, factor float64)
	// widen makes row i of the n of src float64 at wide[i] and wide[n+i], n half of
	// wide, and adds it to total.
	widen func(wide []wideRow, total *wideRow, src []float32, stride int)
	// addPlaces sets sums[j], j < n, to the sum over the places i of wide[n+i-j],
	// from the first place on.
	addPlaces func(sums, wide []wideRow, places []int32)
}

// portableSums are the kernels in plain Go.
var portableSums = sums{
	tabulate:   tabulate,
	addSubsets: addSubsets,
	combine:    combine,
	widen:      widen,
	addPlaces:  addPlaces,
}

func tabulate(table *subsetTable, total *wideRow, src []float32, rows, stride int) {
	table[0] = wideRow{}
	for t := range groupRows {
		var r wideRow
		if t < rows {
			r = widened(src, t*stride)
		}
		half := table[1<<t : 2<<t]
		for i := range half {
			without, with := &table[i], &half[i]
			for p := range with {
				with[p] = without[p] + r[p]
			}
		}
	}
	total.add(&table[subsets-1])
}

func addSubsets(sums []wideRow, tables *[2]subsetTable, first, second []uint8) {
	first, second = first[:len(sums)], second[:len(sums)]
	for j := range sums {
		r, a, b := &sums[j], &tables[0][first[j]], &tables[1][second[j]]
		for p := range r {
			r[p] = (r[p] + a[p]) + b[p]
		}
	}
}

func combine(dst []float32, sums []wideRow, base *wideRow, stride int, factor float64) {
	for j := range sums {
		o, r := (*[wideLanes]float32)(dst[j*stride:]), &sums[j]
		for p := range o {
			o[p] = float32(base[p] + float64(factor*r[p]))
		}
	}
}

func widen(wide []wideRow, total *wideRow, src []float32, stride int) {
	n := len(wide) / 2
	for i := range n {
		wide[i] = widened(src, i*stride)
		wide[n+i] = wide[i]
		total.add(&wide[i])
	}
}

func addPlaces(sums, wide []wideRow, places []int32) {
	for j := range sums {
		var sum wideRow
		from := wide[len(sums)-j:]
		for _, i := range places {
			sum.add(&from[i])
		}
		sums[j] = sum
	}
}

// widened is the half row that starts src[at:].
func widened(src []float32, at int) wideRow {
	var w wideRow
	for p, x := range (*[wideLanes]float32)(src[at:]) {
		w[p] = float64(x)
	}
	return w
}

func (w *wideRow) add(r *wideRow) {
	for p := range w {
		w[p] += r[p]
	}
}
