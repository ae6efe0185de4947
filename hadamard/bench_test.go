package hadamard

import (
	"context"
	"fmt"
	"math/rand/v2"
	"runtime"
	"sync"
	"syscall"
	"testing"
	"time"
)

// benchPixels is how many pixels a benchmarked call decodes, as many as reduce
// does: 17 cache lines, an odd number, which keeps the rows of a block from falling
// into the same cache sets. At v = 511 in and out are 1.1 MB.
const benchPixels = 272

// streamedPixels make blocks that no cache holds.
const streamedPixels = 64<<10 + lanes

func benchBlock(v, stride int) (dst, src []float32) {
	rng := rand.New(rand.NewPCG(1, uint64(v)))
	dst, src = make([]float32, v*stride), make([]float32, v*stride)
	for i := range src {
		dst[i], src[i] = 1, 1000*rng.Float32() // both are there before the clock runs
	}
	return dst, src
}

func bytesInOut(v, pixels int) int64 { return int64(v) * int64(pixels) * 4 * 2 }

// levelKeys name the levels in benchmarks, where a dash and digits would be taken
// for a number of processors.
var levelKeys = map[level]string{pureGo: "go", avx2: "avx2", avx512: "avx512"}

// BenchmarkDecode: MB/s are bytes in plus bytes out, MB/busy-s those per second
// of processor time. BenchmarkCopy moves the
// same bytes; the ratio is what decoding costs over touching the data.
func BenchmarkDecode(b *testing.B) {
	for _, x := range []struct {
		f Family
		v int
	}{
		{MSequence, 63}, {MSequence, 127}, {MSequence, 255}, {MSequence, 511}, {MSequence, 1023}, {MSequence, 2047}, {MSequence, 4095},
		{Legendre, 127}, {Legendre, 499}, {Legendre, 1019}, {TwinPrime, 899}, {Singer, 820}, {SlitScan, 511},
	} {
		b.Run(fmt.Sprintf("%s/%d", x.f, x.v), func(b *testing.B) { benchLevels(b, x.f, x.v, benchPixels, benchPixels) })
	}
}

func benchLevels(b *testing.B, f Family, v, pixels, stride int) {
	c := mustCode(b, f, v)
	dst, src := benchBlock(v, stride)
	for _, l := range levels() {
		b.Run(levelKeys[l], func(b *testing.B) {
			d := newDecoder(c, l)
			b.SetBytes(bytesInOut(v, pixels))
			b.ReportAllocs()
			start := processorTime(b)
			for b.Loop() {
				d.Decode(dst, src, pixels, stride)
			}
			reportBusy(b, bytesInOut(v, pixels), start)
		})
	}
}

// BenchmarkStreamed decodes a block that no cache holds.
func BenchmarkStreamed(b *testing.B) {
	benchLevels(b, MSequence, 511, streamedPixels, streamedPixels)
}

// BenchmarkCopy and BenchmarkCopyStreamed are the plain copies beside them.
func BenchmarkCopy(b *testing.B) {
	for _, v := range []int{63, 127, 255, 499, 511, 820, 899, 1023, 2047, 4095} {
		b.Run(fmt.Sprint(v), func(b *testing.B) { benchCopy(b, v, benchPixels) })
	}
}

func BenchmarkCopyStreamed(b *testing.B) { benchCopy(b, 511, streamedPixels) }

func benchCopy(b *testing.B, v, pixels int) {
	dst, src := benchBlock(v, pixels)
	b.SetBytes(bytesInOut(v, pixels))
	start := processorTime(b)
	for b.Loop() {
		for i := range v {
			copy(dst[i*pixels:(i+1)*pixels], src[i*pixels:])
		}
	}
	reportBusy(b, bytesInOut(v, pixels), start)
}

// processorTime is what this process has taken so far. What else runs on the
// machine counts little in it.
func processorTime(b *testing.B) time.Duration {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		b.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

// reportBusy reports the rate in processor time since start.
func reportBusy(b *testing.B, bytes int64, start time.Duration) {
	b.ReportMetric(float64(bytes)*float64(b.N)/(processorTime(b)-start).Seconds()/1e6, "MB/busy-s")
}

// BenchmarkPixels is how decoding grows with the pixels of a block, at the best
// level; 100 are no multiple of a cache line, 256 and 4096 put all rows into the
// same sets.
func BenchmarkPixels(b *testing.B) {
	c := mustCode(b, MSequence, 511)
	for _, pixels := range []int{16, 48, 100, 256, 272, 1040, 4096, 4112, 16400} {
		b.Run(fmt.Sprint(pixels), func(b *testing.B) {
			dst, src := benchBlock(511, pixels)
			d := NewDecoder(c)
			b.SetBytes(bytesInOut(511, pixels))
			start := processorTime(b)
			for b.Loop() {
				d.Decode(dst, src, pixels, pixels)
			}
			reportBusy(b, bytesInOut(511, pixels), start)
		})
	}
}

// BenchmarkWorkers is how decoding grows with workers that share a decoder and
// have a block each.
func BenchmarkWorkers(b *testing.B) {
	c := mustCode(b, MSequence, 511)
	for workers := 1; workers <= runtime.NumCPU(); workers *= 2 {
		b.Run(fmt.Sprint(workers), func(b *testing.B) {
			d := NewDecoder(c)
			b.SetBytes(int64(workers) * bytesInOut(511, benchPixels))
			dst, src := make([][]float32, workers), make([][]float32, workers)
			for w := range workers {
				dst[w], src[w] = benchBlock(511, benchPixels)
			}
			b.ResetTimer()
			var wg sync.WaitGroup
			for w := range workers {
				wg.Go(func() {
					for range b.N {
						d.Decode(dst[w], src[w], benchPixels, benchPixels)
					}
				})
			}
			wg.Wait()
		})
	}
}

func BenchmarkPredict(b *testing.B) {
	c, err := New(MSequence, 511)
	if err != nil {
		b.Fatal(err)
	}
	d := NewDecoder(c)
	dst, src := benchBlock(511, benchPixels)
	b.SetBytes(bytesInOut(511, benchPixels))
	for b.Loop() {
		d.Predict(dst, src, benchPixels, benchPixels)
	}
}

// BenchmarkVarianceSum: MB/s are bytes in.
func BenchmarkVarianceSum(b *testing.B) {
	c, err := New(MSequence, 511)
	if err != nil {
		b.Fatal(err)
	}
	d := NewDecoder(c)
	dst, src := benchBlock(511, benchPixels)
	b.SetBytes(511 * benchPixels * 4)
	for b.Loop() {
		d.VarianceSum(dst, src, benchPixels, benchPixels, 0)
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
