package audit

import "slices"

// nth is what would stand at place k if x were sorted; it reorders x so that nothing
// before k is larger and nothing behind it smaller (Hoare 1961, Commun. ACM 4, 321).
func nth[T float32 | float64](x []T, k int) T {
	for low, high := 0, len(x)-1; low < high; {
		pivot, i, j := x[k], low, high
		for i <= j {
			for x[i] < pivot {
				i++
			}
			for pivot < x[j] {
				j--
			}
			if i <= j {
				x[i], x[j] = x[j], x[i]
				i, j = i+1, j-1
			}
		}
		if j < k {
			low = i
		}
		if k < i {
			high = j
		}
	}
	return x[k]
}

// quartiles reorders x.
func quartiles(x []float32) (low, middle, high float32) {
	n := len(x)
	middle = nth(x, n/2)
	low = middle
	if n/4 < n/2 {
		low = nth(x[:n/2], n/4)
	}
	return low, middle, nth(x[n/2:], n*3/4-n/2)
}

func median(x []float64) float64 {
	if len(x) == 0 {
		return 0
	}
	list, n := slices.Clone(x), len(x)
	high := nth(list, n/2)
	if n%2 == 1 {
		return high
	}
	return (slices.Max(list[:n/2]) + high) / 2
}
