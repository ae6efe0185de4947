package extract

import "mirrorloom/hadamard"

// coupling gives the covariances of decoded elements in the pixels of a block.
type coupling struct {
	decoder *hadamard.Decoder
	columns []int         // code columns of the elements in question
	by      [][]int32     // m-sequences: the column whose covariance a pair has
	spread  []float32     // [code column][pixel], m-sequences
	even    *evenCoupling // nil where it goes by the samples
}

func (c *Cube) newCoupling(elements []int) *coupling {
	k := &coupling{decoder: c.decoder}
	for _, j := range elements {
		k.columns = append(k.columns, c.columns[j])
	}
	if !c.decoder.CovarianceByColumn() {
		return k
	}
	k.by = table[int32](len(k.columns), len(k.columns))
	for a, j := range k.columns {
		for b, other := range k.columns {
			k.by[a][b] = int32(c.decoder.CovarianceColumn(j, other))
		}
	}
	return k
}

// fork is a coupling for another worker.
func (k *coupling) fork() *coupling {
	own := *k
	own.spread = nil
	return &own
}

// prepare is called before at for each block.
func (k *coupling) prepare(b *block) {
	if k.by == nil || k.even != nil {
		return
	}
	if len(k.spread) != len(b.variances) {
		k.spread = make([]float32, len(b.variances))
	}
	k.decoder.Covariance(k.spread, b.variances, b.n, b.n)
}

// at fills dst, [a][b], with the covariances of all pairs of elements in pixel x of
// the block, without what they have in common.
func (k *coupling) at(dst [][]float64, b *block, x int, own func(slot int) float64) {
	for a := range k.columns {
		dst[a][a] = own(a)
		for e := range a {
			var v float64
			if k.even != nil {
				v = k.even.at(b, x, k.by[a][e])
			} else if k.by != nil {
				v = float64(k.spread[int(k.by[a][e])*b.n+x])
			} else {
				v = k.sum(b, x, k.columns[a], k.columns[e])
			}
			dst[a][e], dst[e][a] = v, v
		}
	}
	if e := b.erased[x]; e != nil {
		e.couple(dst, k.decoder.Code(), k.columns, b.white[x])
	}
}

// sum is sum_k A_jk A_j'k s_k^2, from the definition.
func (k *coupling) sum(b *block, x, j, other int) float64 {
	code := k.decoder.Code()
	open, closed := code.InverseEntries()
	entry := func(row, column int) float64 {
		if code.Bit(row, column) == 1 {
			return open
		}
		return closed
	}
	total := 0.0
	for row := range code.V() {
		total += entry(row, j) * entry(row, other) * float64(b.variances[row*b.n+x])
	}
	return total
}
