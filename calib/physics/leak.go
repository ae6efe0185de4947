package physics

// Contrast C is the light of a mirror that is on over that of the same mirror off, after the
// subtraction of what is there without light (a definition; common practice). With e = 1/C
// a commanded mask W shows (1-e) W + e J, J all ones. Decoding with the inverse of W gives
//
//	(1-e) x_j + (e/k) sum x,
//
// k the open elements of a step: exact for every code whose rows all open k, since then
// W^-1 J = J/k.

// LeakPedestal is e/k, the share of the light of all elements together that the leak of
// closed mirrors adds to each decoded element; k = 1 for a slit scan.
func LeakPedestal(contrast float64, k int) float64 { return 1 / (contrast * float64(k)) }

// LeakDecoded is what an element of a light decodes to beside others; all is the light of
// all elements, itself included.
func LeakDecoded(light, all, contrast float64, k int) float64 {
	return (1-1/contrast)*light + LeakPedestal(contrast, k)*all
}

// LeakOfClosed is the light of n closed mirrors over that of an open one, all lit alike.
func LeakOfClosed(n int, contrast float64) float64 { return float64(n) / contrast }
