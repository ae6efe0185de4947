package fitsutil

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// Every type, at every length and start, against encoding/binary; nothing is
// written beside the samples and nothing in them changed.
func TestPutSamples(t *testing.T) {
	const most, guard = 33, 16
	for dtype, data := range everyType(rand.New(rand.NewPCG(7, 8)), most) {
		kind, n, ok := sampleTypeOf(data)
		require.True(t, ok)
		require.Equal(t, most, n)
		stored := data
		if pixels, unsigned := data.([]uint16); unsigned {
			signed := make([]int16, n)
			for i, v := range pixels {
				signed[i] = int16(int(v) - 32768)
			}
			stored = signed
		}
		var before, after, want bytes.Buffer
		require.NoError(t, binary.Write(&before, binary.LittleEndian, data))
		require.NoError(t, binary.Write(&want, binary.BigEndian, stored))
		size := kind.size()
		for from := range n {
			for to := from; to <= n; to++ {
				guarded := bytes.Repeat([]byte{0xA5}, (to-from)*size+guard)
				putSamples(guarded[:(to-from)*size], data, from, to)
				require.Equal(t, want.Bytes()[from*size:to*size], guarded[:(to-from)*size], dtype)
				require.Equal(t, bytes.Repeat([]byte{0xA5}, guard), guarded[(to-from)*size:], dtype)
			}
		}
		require.NoError(t, binary.Write(&after, binary.LittleEndian, data))
		require.Equal(t, before.Bytes(), after.Bytes(), dtype)
	}
}

func BenchmarkPutSamples(b *testing.B) {
	buffer := make([]byte, chunkBytes)
	for _, data := range []any{make([]uint16, chunkBytes/2), make([]float32, chunkBytes/4), make([]float64, chunkBytes/8)} {
		kind, n, _ := sampleTypeOf(data)
		b.Run(fmt.Sprintf("bitpix%d", kind.bitpix), func(b *testing.B) {
			b.SetBytes(chunkBytes)
			for b.Loop() {
				putSamples(buffer, data, 0, n)
			}
		})
	}
}
