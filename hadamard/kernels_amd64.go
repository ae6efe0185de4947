//go:build !noasm

package hadamard

import "golang.org/x/sys/cpu"

//go:generate go -C internal/gen run . -o ../..

// bestLevel is the best level of this processor. A level includes the lower
// ones; of AVX2 and AVX-512 only the float instructions of AVX and AVX512F are
// used.
func bestLevel() level {
	switch {
	case cpu.X86.HasAVX2 && cpu.X86.HasAVX512F:
		return avx512
	case cpu.X86.HasAVX2:
		return avx2
	}
	return pureGo
}

// passesOf and sumsOf are the kernels of a level that bestLevel allows.
func passesOf(l level) passes {
	switch l {
	case avx2:
		return transformAssembly{gatherAVX2, residueAVX2, first8AVX2, middle8AVX2, middle4AVX2, last8AVX2, last4AVX2}.passes()
	case avx512:
		return transformAssembly{gatherAVX512, residueAVX512, first8AVX512, middle8AVX512, middle4AVX512, last8AVX512, last4AVX512}.passes()
	}
	return portablePasses
}

func sumsOf(l level) sums {
	switch l {
	case avx2:
		return subsetsAssembly{tabulateAVX2, addSubsetsAVX2, combineAVX2, widenAVX2, addPlacesAVX2}.sums()
	case avx512:
		return subsetsAssembly{tabulateAVX512, addSubsetsAVX512, combineAVX512, widenAVX512, addPlacesAVX512}.sums()
	}
	return portableSums
}

// transformAssembly are the functions of transform_*_amd64.s.
type transformAssembly struct {
	gather           func(rows, sum, src *float32, index *int32, count, stride int)
	residue          func(sum *float64, rows, mean *float32, count int)
	first8           func(rows, mean *float32, blocks int)
	middle8, middle4 func(rows *float32, blocks, h int)
	last8, last4     func(rows, drop, base, dst *float32, to *int32, h, stride int, scale float32)
}

// passes checks what the assembly relies on and hands it pointers.
func (a transformAssembly) passes() passes {
	return passes{
		gather: func(rows []row, sum *row, src []float32, index []int32, stride int) {
			mustHold(len(src), len(index), stride, lanes)
			a.gather(&rows[0][0], &sum[0], &src[0], &index[0], len(index), stride)
		},
		residue: func(sum *[lanes]float64, rows []row, mean *row) {
			a.residue(&sum[0], &rows[0][0], &mean[0], len(rows))
		},
		first8:  func(rows []row, mean *row) { a.first8(&rows[0][0], &mean[0], len(rows)/8) },
		middle8: func(rows []row, h int) { a.middle8(&rows[0][0], len(rows)/(8*h), h) },
		middle4: func(rows []row, h int) { a.middle4(&rows[0][0], len(rows)/(4*h), h) },
		last8:   lastPass(a.last8, 8),
		last4:   lastPass(a.last4, 4),
	}
}

func lastPass(last func(rows, drop, base, dst *float32, to *int32, h, stride int, scale float32), radix int) func(*transformScratch, []int32, []float32, int, float32) {
	return func(s *transformScratch, to []int32, dst []float32, stride int, scale float32) {
		mustHold(len(dst), len(s.rows)-1, stride, lanes)
		last(&s.rows[0][0], &s.drop[0], &s.base[0], &dst[0], &to[0], len(s.rows)/radix, stride, scale)
	}
}

// subsetsAssembly are the functions of subsets_*_amd64.s.
type subsetsAssembly struct {
	tabulate   func(table, total *float64, src *float32, rows, stride int)
	addSubsets func(sums, table *float64, first, second *uint8, count int)
	combine    func(dst *float32, sums, base *float64, count, stride int, factor float64)
	widen      func(wide, total *float64, src *float32, count, stride int)
	addPlaces  func(sums, wide *float64, places *int32, count, columns int)
}

// sums checks what the assembly relies on and hands it pointers.
func (a subsetsAssembly) sums() sums {
	return sums{
		tabulate: func(table *subsetTable, total *wideRow, src []float32, rows, stride int) {
			mustHold(len(src), rows, stride, wideLanes)
			a.tabulate(&table[0][0], &total[0], &src[0], rows, stride)
		},
		addSubsets: func(sums []wideRow, tables *[2]subsetTable, first, second []uint8) {
			first, second = first[:len(sums)], second[:len(sums)]
			a.addSubsets(&sums[0][0], &tables[0][0][0], &first[0], &second[0], len(sums))
		},
		combine: func(dst []float32, sums []wideRow, base *wideRow, stride int, factor float64) {
			mustHold(len(dst), len(sums), stride, wideLanes)
			a.combine(&dst[0], &sums[0][0], &base[0], len(sums), stride, factor)
		},
		widen: func(wide []wideRow, total *wideRow, src []float32, stride int) {
			mustHold(len(src), len(wide)/2, stride, wideLanes)
			a.widen(&wide[0][0], &total[0], &src[0], len(wide)/2, stride)
		},
		addPlaces: func(sums, wide []wideRow, places []int32) {
			_ = wide[2*len(sums)-1]
			a.addPlaces(&sums[0][0], &wide[0][0], &places[0], len(places), len(sums))
		},
	}
}

// mustHold guards assembly, which checks nothing, against a block without so
// many rows of so many pixels.
func mustHold(samples, rows, stride, pixels int) {
	if samples < (rows-1)*stride+pixels {
		panic("internal error: hadamard: a kernel was given too short a block")
	}
}
