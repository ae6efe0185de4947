package hadamard

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"
)

// benchPixels is how many pixels a benchmarked call decodes: at v = 511 in and
// out are 2 MiB, as a worker's block would be.
const benchPixels = 512

// benchStride keeps the rows of a block from falling into the same cache sets,
// as the streaming buffers do.
const benchStride = benchPixels + lanes

func benchBlock(v int) (dst, src []float32) {
	rng := rand.New(rand.NewPCG(1, uint64(v)))
	dst, src = make([]float32, v*benchStride), make([]float32, v*benchStride)
	for i := range src {
		src[i] = 1000 * rng.Float32()
	}
	return dst, src
}

func bytesInOut(v int) int64 { return int64(v) * benchPixels * 4 * 2 }

// BenchmarkDecode: MB/s are bytes in plus bytes out. BenchmarkCopy moves the
// same bytes; the ratio is what decoding costs over touching the data.
func BenchmarkDecode(b *testing.B) {
	for _, x := range []struct {
		f Family
		v int
	}{
		{MSequence, 127}, {MSequence, 511}, {MSequence, 1023}, {MSequence, 4095},
		{Legendre, 127}, {Legendre, 503}, {Legendre, 1019}, {TwinPrime, 899}, {SlitScan, 511},
	} {
		b.Run(fmt.Sprintf("%s/%d", x.f, x.v), func(b *testing.B) {
			c, err := New(x.f, x.v)
			if err != nil {
				b.Fatal(err)
			}
			d := NewDecoder(c)
			dst, src := benchBlock(x.v)
			b.SetBytes(bytesInOut(x.v))
			b.ReportAllocs()
			for b.Loop() {
				d.Decode(dst, src, benchPixels, benchStride)
			}
		})
	}
}

// BenchmarkCopy is the plain copy beside BenchmarkDecode.
func BenchmarkCopy(b *testing.B) {
	for _, v := range []int{127, 511, 1023, 4095} {
		b.Run(fmt.Sprint(v), func(b *testing.B) {
			dst, src := benchBlock(v)
			b.SetBytes(bytesInOut(v))
			for b.Loop() {
				for i := range v {
					copy(dst[i*benchStride:i*benchStride+benchPixels], src[i*benchStride:])
				}
			}
		})
	}
}

func BenchmarkPredict(b *testing.B) {
	c, err := New(MSequence, 511)
	if err != nil {
		b.Fatal(err)
	}
	d := NewDecoder(c)
	dst, src := benchBlock(511)
	b.SetBytes(bytesInOut(511))
	for b.Loop() {
		d.Predict(dst, src, benchPixels, benchStride)
	}
}

// BenchmarkVarianceSum: MB/s are bytes in.
func BenchmarkVarianceSum(b *testing.B) {
	c, err := New(MSequence, 511)
	if err != nil {
		b.Fatal(err)
	}
	d := NewDecoder(c)
	dst, src := benchBlock(511)
	b.SetBytes(511 * benchPixels * 4)
	for b.Loop() {
		d.VarianceSum(dst, src, benchPixels, benchStride, 0)
	}
}

func BenchmarkChooseDark(b *testing.B) {
	for _, x := range []struct {
		f Family
		v int
	}{{MSequence, 511}, {MSequence, 1023}, {MSequence, 4095}, {Legendre, 503}, {Legendre, 1019}, {Legendre, 4091}} {
		b.Run(fmt.Sprintf("%s/%d", x.f, x.v), func(b *testing.B) {
			c, err := New(x.f, x.v)
			if err != nil {
				b.Fatal(err)
			}
			for b.Loop() {
				if _, err := ChooseDark(context.Background(), c, DefaultDark(x.v), 1); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
