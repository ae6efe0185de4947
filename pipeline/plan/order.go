package plan

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/sequence"
)

// nested puts last the rows that are missed least: from the end backwards, each time the one
// of those left that the dark columns restore with the least noise, 1/P_kk, P the projector on
// the checks that are left then. What cannot be restored any more comes first, in the order
// of start.
func nested(checks *hadamard.Checks, start []int) []int {
	p := mat.DenseCopyOf(checks.Projector())
	v, _ := p.Dims()
	left := slices.Clone(start)
	var last []int // the last step first
	row := make([]float64, v)
	for range checks.G() {
		best, at := 1e-6, -1
		for i, k := range left {
			if p.At(k, k) > best {
				best, at = p.At(k, k), i
			}
		}
		if at < 0 {
			break
		}
		k := left[at]
		last = append(last, k)
		left = slices.Delete(left, at, at+1)
		copy(row, p.RawRowView(k))
		for i := range v {
			if f := row[i] / best; f != 0 {
				dst := p.RawRowView(i)
				for j, x := range row {
					dst[j] -= f * x
				}
			}
		}
	}
	slices.Reverse(last)
	return append(left, last...)
}

const (
	// driftStarts are how many orders are improved, the best taken; driftRounds bounds the
	// rounds of each (they end by themselves, mostly after 10 to 20).
	driftStarts, driftRounds = 24, 200
)

// drifting is an order in which a throughput that drifts evenly through a cycle marks dark
// columns, where it is measured, rather than elements. For even light y its mark on the
// readings is tau y, tau the time from the middle of the cycle. P(tau) is what dark columns
// see of it; sorting the rows by P(tau) never makes |P(tau)| smaller, since tau and P(tau)
// are then in the same order, so rounds of it end in an order that no round betters. They
// start from random orders, and from rows sorted by the bits of the dark columns, which for
// an m-sequence is a ramp made of dark columns alone.
func drifting(checks *hadamard.Checks, seed uint64) []int {
	p := checks.Projector()
	v := checks.Code().V()
	light := evenLight(checks.Code(), checks.Columns())
	mean := 0.0
	for _, y := range light {
		mean += y / float64(v)
	}
	var best []int
	least := math.Inf(1)
	for start := range driftStarts {
		order := shuffledRows(seed, "drift", start, v)
		if start == 0 {
			order = byDarkBits(checks)
		}
		seen := math.Inf(-1)
		for range driftRounds {
			mark, projected := make([]float64, v), make([]float64, v)
			for at, k := range order {
				mark[k] = rampAt(at, v) * light[k] / mean
			}
			mat.NewVecDense(v, projected).MulVec(p, mat.NewVecDense(v, mark))
			size := mat.Norm(mat.NewVecDense(v, projected), 2)
			if size <= seen*(1+1e-12) {
				break
			}
			seen = size
			slices.SortStableFunc(order, func(a, b int) int {
				switch {
				case projected[a] < projected[b]:
					return -1
				case projected[a] > projected[b]:
					return 1
				}
				return 0
			})
		}
		if e := driftError(checks, order); e < least {
			least, best = e, order
		}
	}
	return best
}

// rampAt is the drift at step at of v: from -1/2 to 1/2, sum 0.
func rampAt(at, v int) float64 { return (float64(at) - float64(v-1)/2) / float64(v) }

// byDarkBits sorts rows by the bits that they have in the dark columns, the first column's
// first.
func byDarkBits(checks *hadamard.Checks) []int {
	code, columns := checks.Code(), checks.Columns()
	rows := naturalRows(code.V())
	slices.SortStableFunc(rows, func(a, b int) int {
		for _, d := range columns {
			if x, y := code.Bit(a, d), code.Bit(b, d); x != y {
				return int(x) - int(y)
			}
		}
		return 0
	})
	return rows
}

// evenLight is what rows read of a field of elements alike, 1 each.
func evenLight(code *hadamard.Code, darkColumns []int) []float64 {
	y := make([]float64, code.V())
	for k := range y {
		dark := 0
		for _, d := range darkColumns {
			dark += int(code.Bit(k, d))
		}
		y[k] = float64(code.K() - dark)
	}
	return y
}

// driftError is markError of a throughput that drifts evenly by 1 from the first to the last
// step of a cycle.
func driftError(checks *hadamard.Checks, order []int) float64 {
	drift := make([]float64, len(order))
	for at, k := range order {
		drift[k] = rampAt(at, len(order))
	}
	return markError(checks.Code(), checks.Columns(), drift)
}

// markError is the rms error of an element, in parts of its light, that throughputs of 1 +
// mark, by code row, leave in a field of elements alike when nothing corrects them; without
// what is common to all elements, which is a change of scale.
func markError(code *hadamard.Code, dark []int, mark []float64) float64 {
	readings := evenLight(code, dark)
	sum := 0.0
	for k := range readings {
		readings[k] *= mark[k]
		sum += readings[k]
	}
	open, closed := code.InverseEntries()
	total, square, n := 0.0, 0.0, 0.0
	for j := range code.V() {
		if _, is := slices.BinarySearch(dark, j); is {
			continue
		}
		x := closed * sum
		for k, m := range readings {
			if code.Bit(k, j) == 1 {
				x += (open - closed) * m
			}
		}
		total, square, n = total+x, square+x*x, n+1
	}
	return math.Sqrt(max(0, square/n-total*total/(n*n)))
}

func naturalRows(v int) []int {
	rows := make([]int, v)
	for i := range rows {
		rows[i] = i
	}
	return rows
}

func shuffledRows(seed uint64, stream string, cycle, v int) []int {
	rows := naturalRows(v)
	random(seed, stream, cycle).Shuffle(v, func(i, k int) { rows[i], rows[k] = rows[k], rows[i] })
	return rows
}

// slitNested takes every second of what lies between elements taken already: a night cut
// short has seen the whole field, if coarsely. It is the order of the reversed bits.
func slitNested(v int) []int {
	width := 0
	for 1<<width < v {
		width++
	}
	var rows []int
	for i := range 1 << width {
		k := 0
		for b := range width {
			k |= i >> b & 1 << (width - 1 - b)
		}
		if k < v {
			rows = append(rows, k)
		}
	}
	return rows
}

// scienceOrders gives the rows of each science cycle in the order of exposure. A code without
// dark columns has no order that serves it better than a random one.
func scienceOrders(order string, code *hadamard.Code, dark []int, cycles int, seed uint64) ([][]int, error) {
	v := code.V()
	var once []int // an order that is the same in all cycles
	switch order {
	case sequence.OrderNatural:
		once = naturalRows(v)
	case sequence.OrderNested, sequence.OrderDrift:
		if code.Family() == hadamard.SlitScan {
			once = slitNested(v)
			break
		}
		if len(dark) == 0 {
			once = shuffledRows(seed, "science", 1, v)
			break
		}
		checks, err := hadamard.NewChecks(code, dark)
		if err != nil {
			return nil, fmt.Errorf("ordering the steps: %w", err)
		}
		if order == sequence.OrderDrift {
			once = drifting(checks, seed)
		} else {
			once = nested(checks, shuffledRows(seed, "science", 1, v))
		}
	}
	list := make([][]int, cycles)
	for i := range list {
		switch {
		case once == nil:
			list[i] = shuffledRows(seed, "science", i+1, v)
		case order == sequence.OrderDrift && i%2 == 1:
			// Backwards: over two cycles an even drift cancels.
			list[i] = slices.Clone(once)
			slices.Reverse(list[i])
		default:
			list[i] = once
		}
	}
	return list, nil
}
