package hadamard

// legendreRow has ones at 0 and at the non-zero squares mod the prime v.
func legendreRow(v int) []uint8 {
	row := make([]uint8, v)
	for x := range v {
		row[x*x%v] = 1
	}
	return row
}

// twinPrimeRow is the complement of the twin-prime difference set of
// v = p(p+2): the multiples of p+2, and the units whose Legendre symbols mod p
// and mod p+2 agree. The set has (v-1)/2 members, its complement (v+1)/2.
func twinPrimeRow(v int) []uint8 {
	p := 3
	for p*(p+2) < v {
		p += 2
	}
	q := p + 2
	small, large := squares(p), squares(q)
	row := make([]uint8, v)
	for x := range row {
		inSet := x%q == 0 || x%p != 0 && small[x%p] == large[x%q]
		if !inSet {
			row[x] = 1
		}
	}
	return row
}

// squares marks the squares mod p, 0 among them.
func squares(p int) []bool {
	is := make([]bool, p)
	for x := range p {
		is[x*x%p] = true
	}
	return is
}

func isPrime(n int) bool {
	for d := 2; d*d <= n; d++ {
		if n%d == 0 {
			return false
		}
	}
	return n > 1
}
