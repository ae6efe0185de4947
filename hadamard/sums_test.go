package hadamard

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// The kernels of each level against sums written out one by one. They are
// of the same additions in the same order, so that they agree bit for bit.

func randomWide(rng *rand.Rand, n int) []wideRow {
	w := make([]wideRow, n)
	for i := range w {
		for p := range w[i] {
			w[i][p] = rng.NormFloat64()
		}
	}
	return w
}

func TestTabulate(t *testing.T) {
	for _, l := range levels() {
		for rows := 0; rows <= groupRows; rows++ {
			for stride := wideLanes; stride < wideLanes+3; stride++ {
				src := newGuarded(groupRows*stride, stride)
				copy(src.block, randomBlock(5, groupRows, stride))
				var table subsetTable
				total := wideRow{1, 2, 3}
				before := total
				sumsOf(l).tabulate(&table, &total, src.block, rows, stride)
				for p := range wideLanes {
					for subset := range table {
						want := 0.0
						for row := range rows {
							if subset>>row&1 == 1 {
								want += float64(src.block[row*stride+p])
							}
						}
						require.Equal(t, want, table[subset][p], "%s: subset %b of %d rows", l, subset, rows)
					}
					require.Equal(t, before[p]+table[subsets-1][p], total[p], l)
				}
			}
		}
	}
}

func TestAddSubsets(t *testing.T) {
	rng := rand.New(rand.NewPCG(2, 2))
	for _, l := range levels() {
		for _, n := range []int{1, 2, 3, 8, 33} {
			tables := [2]subsetTable{subsetTable(randomWide(rng, subsets)), subsetTable(randomWide(rng, subsets))}
			first, second := make([]uint8, n+1), make([]uint8, n+1)
			for j := range first {
				first[j], second[j] = uint8(rng.Uint32()), uint8(rng.Uint32())
			}
			sums := randomWide(rng, n+1)
			want := append([]wideRow(nil), sums...)
			for j := range n {
				for p := range wideLanes {
					want[j][p] += tables[0][first[j]][p]
					want[j][p] += tables[1][second[j]][p]
				}
			}
			sumsOf(l).addSubsets(sums[:n], &tables, first, second)
			require.Equal(t, want, sums, "%s, %d sums; the one behind them is a guard", l, n)
		}
	}
}

func TestCombine(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	for _, l := range levels() {
		for offset := range lanes {
			const n = 5
			stride := wideLanes + offset
			sums, base := randomWide(rng, n), randomWide(rng, 1)[0]
			dst := newGuarded((n-1)*stride+wideLanes, offset)
			sumsOf(l).combine(dst.block, sums, &base, stride, 0.3)
			dst.requireWhole(t, wideLanes, stride, l.String())
			for j := range n {
				for p := range wideLanes {
					require.Equal(t, float32(base[p]+float64(0.3*sums[j][p])), dst.block[j*stride+p], l)
				}
			}
		}
	}
}

// TestPlaces: widen and addPlaces, for numbers of columns that are a multiple of
// four and others.
func TestPlaces(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 4))
	for _, l := range levels() {
		for _, n := range []int{1, 3, 4, 7, 8, 21} {
			stride := wideLanes + n%3
			src := randomBlock(9, n, stride)
			wide, total := randomWide(rng, 2*n+1), wideRow{}
			behind := wide[2*n]
			sumsOf(l).widen(wide[:2*n], &total, src, stride)
			require.Equal(t, behind, wide[2*n], l)
			var all wideRow
			for i := range n {
				for p := range wideLanes {
					x := float64(src[i*stride+p])
					all[p] += x
					require.Equal(t, [2]float64{x, x}, [2]float64{wide[i][p], wide[n+i][p]}, l)
				}
			}
			require.Equal(t, all, total, l)

			var places []int32
			for _, i := range rng.Perm(n)[:1+n/2] {
				places = append(places, int32(i))
			}
			sums := randomWide(rng, n+1)
			behind = sums[n]
			sumsOf(l).addPlaces(sums[:n], wide[:2*n], places)
			require.Equal(t, behind, sums[n], l)
			for j := range n {
				for p := range wideLanes {
					want := 0.0
					for _, i := range places {
						want += float64(src[(int(i)-j+n)%n*stride+p])
					}
					require.Equal(t, want, sums[j][p], "%s: column %d of %d", l, j, n)
				}
			}
		}
	}
}
