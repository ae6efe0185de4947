package hadamard

import "fmt"

// minDefaultDark is the fewest dark columns of the default: 16 give an audit
// and repairs something to work with even for short codes.
const minDefaultDark = 16

// DefaultDark is the number of dark columns that the default asks of a code of
// size v at least: max(16, floor((v+1)/8)).
func DefaultDark(v int) int { return max(minDefaultDark, (v+1)/8) }

// Smallest makes the family's smallest code that holds a field of n elements.
//
// With dark < 0 it is the smallest v with v-n >= DefaultDark(v); with
// dark >= 0 the smallest v >= n+dark. In both cases the field's dark columns
// are all v-n that are left. A slit scan has no dark columns whatever dark
// says: v = n.
//
// Errors: ErrUnknownFamily; n below 1; a *NoCodeError when no code up to MaxV
// is large enough.
func Smallest(f Family, n, dark int) (*Code, error) {
	if _, err := ParseFamily(string(f)); err != nil {
		return nil, err
	}
	if n < 1 {
		return nil, fmt.Errorf("a field of %d elements has no code: at least one element is needed", n)
	}
	for _, v := range Sizes(f) {
		if holds(f, v, n, dark) {
			return New(f, v)
		}
	}
	return nil, &NoCodeError{Family: f, Elements: n, Dark: dark}
}

func holds(f Family, v, n, dark int) bool {
	switch {
	case f == SlitScan:
		return v >= n
	case dark < 0:
		return v-n >= DefaultDark(v)
	default:
		// Not v >= n+dark: the sum of two huge numbers would wrap.
		return v >= n && v-n >= dark
	}
}
