package rehearse

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// Streams of different keys differ, those of the same key do not.
func TestStreams(t *testing.T) {
	seen := map[uint64]string{}
	for _, seed := range []uint64{0, 1, math.MaxUint64} {
		for _, purpose := range []string{"read", "photons", ""} {
			for step := range 20 {
				for row := range 20 {
					key := fmt.Sprint(seed, purpose, step, row)
					first := newStream(seed, purpose, step, row).Uint64()
					require.Equal(t, first, newStream(seed, purpose, step, row).Uint64())
					require.Empty(t, seen[first], key)
					seen[first] = key
				}
			}
		}
	}
}

// First numbers of neighbouring streams are as independent as those of one: the
// mean and the correlation of 40000 neighbours.
func TestStreamsAreIndependent(t *testing.T) {
	const n = 40000
	sum, product := 0.0, 0.0
	before := 0.0
	for row := range n {
		u := uniform(newStream(9, "read", 3, row)) - 0.5
		sum += u
		product += u * before
		before = u
	}
	require.InDelta(t, 0, sum/n, 5/math.Sqrt(12*n))
	require.InDelta(t, 0, product/n, 5.0/12/math.Sqrt(n))
}

// Poisson numbers: 200000 of each mean, over both algorithms and their border:
// mean and variance within 5 standard errors, and scipy's chi-square of their
// distribution not below 1e-4. Means stay below 2^24, for float32 to hold the
// counts.
func TestCrosscheckPoisson(t *testing.T) {
	const n = 200000
	means := []float64{0.06, 1, 4.2, 9.99, 10, 15.5, 47.3, 300, 20000, 3e6}
	var counts bytes.Buffer
	for _, mean := range means {
		pcg := newStream(2, "poisson", 0, int(mean*100))
		sum, square := 0.0, 0.0
		for range n {
			k := poisson(pcg, mean)
			require.Equal(t, math.Floor(k), k)
			sum += k - mean
			square += (k - mean) * (k - mean)
			counts.Write(binary.LittleEndian.AppendUint32(nil, math.Float32bits(float32(k))))
		}
		require.InDelta(t, 0, sum/n, 5*math.Sqrt(mean/n), mean)
		require.InDelta(t, 1, square/n/mean, 5*math.Sqrt((2+1/mean)/n), mean)
	}
	path := filepath.Join(t.TempDir(), "counts")
	require.NoError(t, os.WriteFile(path, counts.Bytes(), 0o666))
	for i, p := range numbers(t, outside.Python(t, "rehearse_values.py", append([]string{"poisson", path}, words(means)...)...)) {
		t.Logf("mean %v: chi-square probability %.3f", means[i], p)
		require.Greater(t, p, 1e-4, means[i])
	}
	require.Zero(t, poisson(newStream(1, "", 0, 0), 0))
	require.Zero(t, poisson(newStream(1, "", 0, 0), math.NaN()))
}

func TestLogFactorial(t *testing.T) {
	for k := range 2000 {
		want, _ := math.Lgamma(float64(k) + 1)
		require.InDelta(t, want, logFactorial(float64(k)), 1e-12*(1+want))
	}
}

func BenchmarkPoisson(b *testing.B) {
	for _, mean := range []float64{0.1, 5, 100, 3000} {
		b.Run(fmt.Sprint(mean), func(b *testing.B) {
			pcg := newStream(1, "", 0, 0)
			b.SetBytes(2)
			for range b.N {
				poisson(pcg, mean)
			}
		})
	}
}
