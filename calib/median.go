package calib

import "math"

// medians are the median of at least one value, none NaN, and the median of the absolute
// deviations from it; v is overwritten. Readings in whole numbers that lie together, as
// those of an overscan do, are counted rather than sorted.
func medians(v []float32) (centre, deviation float64) {
	if centre, deviation, ok := countedMedians(v); ok {
		return centre, deviation
	}
	centre = median(v)
	return centre, medianDeviation(v, centre)
}

// countedSpan bounds the whole numbers that are counted.
const countedSpan = 128

func countedMedians(v []float32) (centre, deviation float64, ok bool) {
	const most = 1 << 24 // float32 has gaps above
	low, high := v[0], v[0]
	for _, x := range v {
		if x < low {
			low = x
		}
		if x > high {
			high = x
		}
	}
	if !(high-low < countedSpan && low > -most && high < most) || len(v) > math.MaxUint16 {
		return 0, 0, false
	}
	var counts [countedSpan]uint16
	first := int32(low)
	for _, x := range v {
		i := int32(x)
		if float32(i) != x {
			return 0, 0, false
		}
		counts[(i-first)&(countedSpan-1)]++
	}
	twice := counted(counts[:int32(high)-first+1], len(v))
	// Deviations in halves.
	var away [2 * countedSpan]uint16
	for i, n := range counts[:int32(high)-first+1] {
		d := 2*i - twice
		away[max(d, -d)] += n
	}
	return float64(first) + float64(twice)/2, float64(counted(away[:], len(v))) / 4, true
}

// counted is twice the median of n whole numbers from 0 on, counts[i] of them i.
func counted(counts []uint16, n int) int {
	before, lower := 0, -1
	for i, c := range counts {
		before += int(c)
		if lower < 0 && before > (n-1)/2 {
			lower = i
		}
		if before > n/2 {
			return lower + i
		}
	}
	panic("internal error: fewer numbers were counted than there are")
}

// medianDeviation replaces v by its absolute deviations from centre and returns
// their median.
func medianDeviation(v []float32, centre float64) float64 {
	for i, x := range v {
		v[i] = float32(math.Abs(float64(x) - centre))
	}
	return median(v)
}

// median of at least one value, none NaN; the mean of the two in the middle for an
// even number. Reorders v.
func median(v []float32) float64 {
	if len(v) <= fewValues {
		return medianOfFew(v)
	}
	half := len(v) / 2
	upper := selectAt(v, half)
	if len(v)%2 == 1 {
		return float64(upper)
	}
	lower := v[0]
	for _, x := range v[1:half] {
		lower = max(lower, x)
	}
	return (float64(lower) + float64(upper)) / 2
}

// selectAt returns the value that sorting would bring to index k, and leaves the
// smaller ones before it (Hoare 1961, Communications of the ACM 4, 321).
func selectAt(v []float32, k int) float32 {
	low, high := 0, len(v)-1
	for low < high {
		pivot := middleOf(v[low], v[low+(high-low)/2], v[high])
		i, j := low, high
		for i <= j {
			for v[i] < pivot {
				i++
			}
			for v[j] > pivot {
				j--
			}
			if i <= j {
				v[i], v[j] = v[j], v[i]
				i++
				j--
			}
		}
		switch {
		case k <= j:
			high = j
		case k >= i:
			low = i
		default:
			return v[k]
		}
	}
	return v[k]
}

func middleOf(a, b, c float32) float32 {
	return max(min(a, b), min(max(a, b), c))
}

// fewValues are sorted whole: the processor cannot foretell comparisons of noise, and does
// without jumps what it takes for so few.
const fewValues = 12

// medianOfFew sorts by exchanges of neighbours, on integers that are ordered as the floats
// are whose bits they hold: smaller and larger of two integers are found without a jump.
func medianOfFew(v []float32) float64 {
	var keys [fewValues]int32
	n := len(v)
	for i, x := range v {
		keys[i] = orderedBits(math.Float32bits(x))
	}
	for last := n - 1; last > 0; last-- {
		top := keys[0]
		for i := range last {
			next := keys[i+1]
			keys[i] = min(top, next)
			top = max(top, next)
		}
		keys[last] = top
	}
	lower, upper := keys[(n-1)/2], keys[n/2]
	return (float64(valueOf(lower)) + float64(valueOf(upper))) / 2
}

// orderedBits turns the bits of a negative float, which grow with its size, around;
// valueOf turns them back.
func orderedBits(bits uint32) int32 {
	i := int32(bits)
	return i ^ int32(uint32(i>>31)>>1)
}

func valueOf(key int32) float32 {
	return math.Float32frombits(uint32(key ^ int32(uint32(key>>31)>>1)))
}
