package hadamard

import "slices"

// singer is a Singer design: the points and the hyperplanes of the projective space of
// dimension d over GF(q), q = p^m, so that
//
//	v = (q^(d+1)-1)/(q-1), k = (q^d-1)/(q-1), l = (q^(d-1)-1)/(q-1):
//
// of its v columns about one in q is open (Singer 1938, Trans. Am. Math. Soc. 43, 377).
type singer struct{ p, m, d int }

// minDimension: with d = 1 each hyperplane is one point, which is a slit scan.
const minDimension = 2

func (s singer) q() int { return power(s.p, s.m) }

func (s singer) v() int { return (power(s.q(), s.d+1) - 1) / (s.q() - 1) }

// singers lists the designs up to MaxV by ascending v. Where several have the same v
// (31 is the only one: q = 5, d = 2 and q = 2, d = 4) the one of the largest q is kept:
// that of q = 2 is the complement of an m-sequence.
func singers() []singer {
	var all []singer
	for p := 2; p*p+p+1 <= MaxV; p++ {
		if !isPrime(p) {
			continue
		}
		for m := 1; (singer{p, m, minDimension}).v() <= MaxV; m++ {
			for d := minDimension; (singer{p, m, d}).v() <= MaxV; d++ {
				all = append(all, singer{p, m, d})
			}
		}
	}
	slices.SortFunc(all, func(a, b singer) int {
		if a.v() != b.v() {
			return a.v() - b.v()
		}
		return b.q() - a.q()
	})
	return slices.CompactFunc(all, func(a, b singer) bool { return a.v() == b.v() })
}

// singerOf finds the design of size v, which must be one of Sizes(Singer).
func singerOf(v int) singer {
	for _, s := range singers() {
		if s.v() == v {
			return s
		}
	}
	panic("internal error: hadamard: a size without a Singer design")
}

// row has ones at the i with Tr(x^i) = 0, x the generator of GF(q^(d+1)) and Tr the trace
// to GF(q), Tr(y) = y + y^q + ... + y^(q^d). x^i for i = 0..v-1 stand for the points of
// the space and the elements of trace 0 for a hyperplane; multiplying by x moves it to the
// next. That the trace commutes with powers of p leaves the set as it is when its members
// are multiplied by p mod v.
func (s singer) row() (first []uint8, poly uint32) {
	f := newField(s.p, s.m*(s.d+1))
	powers := f.powers()
	first = make([]uint8, s.v())
	for i := range first {
		trace := make([]int, f.degree)
		at := i
		for range s.d + 1 {
			f.add(trace, powers[at])
			at = at * s.q() % len(powers)
		}
		if !slices.ContainsFunc(trace, func(c int) bool { return c != 0 }) {
			first[i] = 1
		}
	}
	return first, f.polynomialNumber()
}
