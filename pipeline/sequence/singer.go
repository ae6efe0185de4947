package sequence

// singerField is GF(q^(d+1)), q^(d+1) = p^degree, of the Singer code of v =
// (q^(d+1)-1)/(q-1) columns.
type singerField struct{ p, q, degree, v int }

// singerFieldOf finds the field of a Singer code of v columns, d 2 or more; of the largest
// q where there are several.
func singerFieldOf(v int) (singerField, bool) {
	for q := v; q >= 2; q-- {
		if q*q+q+1 > v {
			continue
		}
		p, m := primePower(q)
		if p == 0 {
			continue
		}
		for points, d := q*q+q+1, 2; points <= v; points, d = points*q+1, d+1 {
			if points == v {
				return singerField{p: p, q: q, degree: m * (d + 1), v: v}, true
			}
		}
	}
	return singerField{}, false
}

// primePower gives p and m of q = p^m, 0 and 0 where q is no power of a prime.
func primePower(q int) (p, m int) {
	for p = 2; q%p != 0; p++ {
	}
	for ; q%p == 0; q /= p {
		m++
	}
	if q != 1 {
		return 0, 0
	}
	return p, m
}

// row has ones at the i of 0..v-1 where x^i has trace 0 over GF(q) (Singer 1938, Trans. Am.
// Math. Soc. 43, 377), x a root of the polynomial over GF(p) whose coefficients are the
// digits of poly in base p, the lowest first. It is nil where that polynomial has another
// degree or is not primitive.
//
// The trace u_i of x^i over GF(p) is the recurring sequence of the polynomial, that starts
// with the sums of the powers of its roots (Newton's identities). As x^v generates GF(q),
// the trace over GF(q) vanishes where u_i, u_(i+v), ... u_(i+(q-2)v) all do.
func (f singerField) row(poly uint32) []uint8 {
	lower := f.coefficients(poly)
	if lower == nil {
		return nil
	}
	u := f.traces(lower)
	if u == nil {
		return nil
	}
	row := make([]uint8, f.v)
	for i := range row {
		row[i] = 1
		for at := i; at < len(u); at += f.v {
			if u[at] != 0 {
				row[i] = 0
			}
		}
	}
	return row
}

// coefficients are those below the leading one, which must be 1; nil if it is not.
func (f singerField) coefficients(poly uint32) []int {
	lower := make([]int, f.degree)
	for t := range lower {
		lower[t] = int(poly % uint32(f.p))
		poly /= uint32(f.p)
	}
	if poly != 1 {
		return nil
	}
	return lower
}

// traces is one period of u, p^degree - 1 long; nil if the period is shorter, so that the
// polynomial is not primitive.
func (f singerField) traces(lower []int) []int {
	period := f.v * (f.q - 1)
	u := make([]int, period+f.degree)
	n := f.degree
	for k := range n {
		// u_k = -(c_(n-1) u_(k-1) + ... + c_(n-k+1) u_1 + k c_(n-k)), u_0 = n.
		if k == 0 {
			u[0] = n % f.p
			continue
		}
		sum := k * lower[n-k]
		for j := 1; j < k; j++ {
			sum += lower[n-j] * u[k-j]
		}
		u[k] = (f.p - sum%f.p) % f.p
	}
	for i := n; i < len(u); i++ {
		sum := 0
		for t, c := range lower {
			sum += c * u[i-n+t]
		}
		u[i] = (f.p - sum%f.p) % f.p
	}
	if !f.fullPeriod(lower, u) {
		return nil
	}
	return u[:period]
}

// fullPeriod tells whether the window of degree values comes back after the period and not
// after any part of it: its values then are all that there are but zeros.
func (f singerField) fullPeriod(lower, u []int) bool {
	if lower[0] == 0 {
		return false
	}
	period := len(u) - f.degree
	for i := 1; i <= period; i++ {
		same := true
		for t := range f.degree {
			if u[i+t] != u[t] {
				same = false
				break
			}
		}
		if same {
			return i == period
		}
	}
	return false
}
