package hadamard

import "fmt"

// Code is a design matrix W. It never changes and is safe for concurrent use.
type Code struct {
	family  Family
	v, k, l int
	poly    uint32
	first   []uint8 // row 0; nil for the slit scan
}

// New makes the code of size v of a family.
//
// A cyclic code is W[i][j] = s[(i+j) mod v] with s its first row:
//   - MSequence: s[i+p] is the exclusive or of s[i+t] over the lower exponents
//     t of the primitive polynomial Poly, from p-1 zeros and a one;
//   - Legendre: ones at 0 and at the non-zero squares mod v (Paley 1933,
//     J. Math. Phys. 12, 311; the S-matrices in the appendix of Harwit and
//     Sloane 1979, Hadamard Transform Optics, for v = 7, 11, 19, 23);
//   - TwinPrime: the complement of the twin-prime difference set of Stanton and
//     Sprott 1958, Canad. J. Math. 10, 73, so that k = (v+1)/2;
//   - Singer: ones where x^i has trace 0, x a generator of GF(q^(d+1)) (Singer
//     1938, Trans. Am. Math. Soc. 43, 377), of the largest q where several have
//     this v;
//   - a complement: ones where its family has zeros.
//
// The slit scan is W = I.
//
// Errors: ErrUnknownFamily, or a *NoCodeError that names the nearest sizes.
func New(f Family, v int) (*Code, error) {
	if _, err := ParseFamily(string(f)); err != nil {
		return nil, err
	}
	if !hasSize(f, v) {
		return nil, noCode(f, v)
	}
	if f == SlitScan {
		return &Code{family: f, v: v, k: 1, l: 0}, nil
	}
	base, complement := f.Base()
	first, poly := firstRow(base, v)
	if complement {
		for j := range first {
			first[j] = 1 - first[j]
		}
	}
	c, err := newCyclic(f, first)
	if err != nil {
		return nil, err
	}
	c.poly = poly
	return c, nil
}

// firstRow is the first row of a cyclic family of a size it has, and Poly.
func firstRow(f Family, v int) (first []uint8, poly uint32) {
	switch f {
	case MSequence:
		return mSequence(degreeOf(v)), primitive[degreeOf(v)]
	case Legendre:
		return legendreRow(v), 0
	case TwinPrime:
		return twinPrimeRow(v), 0
	default:
		return singerOf(v).row()
	}
}

// newCyclic makes a code of a first row, whose parameters it counts.
func newCyclic(f Family, first []uint8) (*Code, error) {
	v, k := len(first), 0
	for _, bit := range first {
		k += int(bit)
	}
	// l from k(k-1) = l(v-1); that every shift really shares l ones is what
	// makes the row a difference set, and the tests count it.
	if v < 2 || k*(k-1)%(v-1) != 0 {
		return nil, fmt.Errorf("a row of %d ones in %d is no difference set: k(k-1) must be a multiple of v-1", k, v)
	}
	return &Code{family: f, v: v, k: k, l: k * (k - 1) / (v - 1), first: first}, nil
}

func hasSize(f Family, v int) bool {
	for _, size := range Sizes(f) {
		if size == v {
			return true
		}
	}
	return false
}

// Family is the code's family.
func (c *Code) Family() Family { return c.family }

// V is the number of rows and of columns.
func (c *Code) V() int { return c.v }

// K is the number of ones in each row and in each column.
func (c *Code) K() int { return c.k }

// L is the number of ones that any two rows, or any two columns, share.
func (c *Code) L() int { return c.l }

// Design gives v, k and l to the formulas of the S/N theory.
func (c *Code) Design() Design { return Design{V: c.v, K: c.k, L: c.l} }

// Poly is the primitive polynomial of an m-sequence over GF(2), or of a Singer
// code over GF(p), p the prime of its q, or of the complement of one: a number
// in base p (2 for an m-sequence) whose digit of p^t is the coefficient of x^t,
// the leading one included (x^3+x+1 over GF(2) is 11); 0 for the other families.
func (c *Code) Poly() uint32 { return c.poly }

// Bit is W[row][column], 0 or 1. It panics when an index is outside 0..v-1.
func (c *Code) Bit(row, column int) uint8 {
	if row < 0 || row >= c.v || column < 0 || column >= c.v {
		panic(fmt.Sprintf("internal error: hadamard: bit (%d, %d) of a code of %d", row, column, c.v))
	}
	if c.first == nil {
		if row == column {
			return 1
		}
		return 0
	}
	i := row + column
	if i >= c.v {
		i -= c.v
	}
	return c.first[i]
}

// Row is row number row of W as v bytes 0 or 1, in a fresh slice.
func (c *Code) Row(row int) []uint8 {
	bits := make([]uint8, c.v)
	for j := range bits {
		bits[j] = c.Bit(row, j)
	}
	return bits
}

// InverseEntries gives the two entries of A = W^-1 = (W' - (l/k)J)/(k-l):
// open = 1/k where W' is 1, closed = -l/(k(k-l)) where it is 0. For an
// S-matrix they are 2/(v+1) and -2/(v+1); for the slit scan 1 and 0.
func (c *Code) InverseEntries() (open, closed float64) { return c.Design().InverseEntries() }
