package hadamard

import "slices"

// field is GF(p^degree) as the polynomials over GF(p) modulo a primitive one, of
// which x is then a generator: all elements but 0 are powers of x. An element is
// its degree coefficients below p, that of x^t at t.
//
// Finite fields: Lidl and Niederreiter 1997, Finite Fields, chapters 2 and 3 (from
// memory).
type field struct {
	p, degree int
	// lower are the coefficients of the monic polynomial below its leading term.
	lower []int
}

// newField searches for the first primitive polynomial in the order of
// polynomialNumber, p a prime. There is one of every degree, and among the
// polynomials of degree n more than one in 5n is for the sizes here.
func newField(p, degree int) *field {
	f := &field{p: p, degree: degree, lower: make([]int, degree)}
	for {
		f.increment()
		if f.isPrimitive() {
			return f
		}
	}
}

// increment goes on to the next polynomial.
func (f *field) increment() {
	for t := range f.lower {
		f.lower[t]++
		if f.lower[t] < f.p {
			return
		}
		f.lower[t] = 0
	}
	panic("internal error: hadamard: no primitive polynomial, though every degree has one")
}

// order is the number of elements but 0.
func (f *field) order() int { return power(f.p, f.degree) - 1 }

// isPrimitive tells whether the powers of x are as many different ones as there are
// polynomials of lower degree but 0. That they are makes the ring a field, so that
// nothing has to ask whether the polynomial is irreducible.
func (f *field) isPrimitive() bool {
	if f.lower[0] == 0 { // divisible by x
		return false
	}
	order := f.order()
	if !f.isOne(f.generatorPower(order)) {
		return false
	}
	for _, r := range primeFactors(order) {
		if f.isOne(f.generatorPower(order / r)) {
			return false
		}
	}
	return true
}

func (f *field) isOne(a []int) bool { return slices.Equal(a, f.one()) }

func (f *field) one() []int {
	a := make([]int, f.degree)
	a[0] = 1
	return a
}

// generatorPower is x^n by squaring.
func (f *field) generatorPower(n int) []int {
	result, square := f.one(), f.one()
	f.timesX(square)
	for ; n > 0; n >>= 1 {
		if n&1 == 1 {
			result = f.times(result, square)
		}
		square = f.times(square, square)
	}
	return result
}

// timesX multiplies a by x in place: the coefficient that leaves at the top comes
// back as that many times -lower.
func (f *field) timesX(a []int) {
	top := a[f.degree-1]
	copy(a[1:], a)
	a[0] = 0
	for t, c := range f.lower {
		a[t] = (a[t] + top*(f.p-c)) % f.p
	}
}

// times is a b.
func (f *field) times(a, b []int) []int {
	product, shifted := make([]int, f.degree), slices.Clone(a)
	for _, c := range b {
		for t, x := range shifted {
			product[t] = (product[t] + c*x) % f.p
		}
		f.timesX(shifted)
	}
	return product
}

// add adds b to a.
func (f *field) add(a, b []int) {
	for t, x := range b {
		a[t] = (a[t] + x) % f.p
	}
}

// powers lists x^i for i = 0..order-1.
func (f *field) powers() [][]int {
	n := f.order()
	all, flat := make([][]int, n), make([]int, n*f.degree)
	a := f.one()
	for i := range all {
		all[i] = flat[i*f.degree : (i+1)*f.degree]
		copy(all[i], a)
		f.timesX(a)
	}
	return all
}

// polynomialNumber is the primitive polynomial read as a number in base p, the
// coefficient of x^t the digit of p^t, the leading one included.
func (f *field) polynomialNumber() uint32 {
	n := uint32(1)
	for t := f.degree - 1; t >= 0; t-- {
		n = n*uint32(f.p) + uint32(f.lower[t])
	}
	return n
}

// power is base^n for small whole numbers.
func power(base, n int) int {
	x := 1
	for range n {
		x *= base
	}
	return x
}

// primeFactors are the different primes that divide n.
func primeFactors(n int) []int {
	var primes []int
	for r := 2; r*r <= n; r++ {
		if n%r != 0 {
			continue
		}
		primes = append(primes, r)
		for n%r == 0 {
			n /= r
		}
	}
	if n > 1 {
		primes = append(primes, n)
	}
	return primes
}
