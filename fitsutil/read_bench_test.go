package fitsutil

import (
	"fmt"
	"os"
	"testing"
)

// benchRows and benchWidth make a strip of a large detector, read row group by row group as
// the reduction does it. The file lies in the page cache.
const benchWidth, benchRows, benchStrip = 4096, 2048, 64

// BenchmarkReadRows counts the bytes in the file. Set it against BenchmarkReadPlain, which only
// brings the same bytes from the page cache into one buffer, and BenchmarkCopy, a plain copy in
// memory, of the same run.
func BenchmarkReadRows(b *testing.B) {
	for _, bitpix := range []int{8, 16, 32, -32, -64} {
		b.Run(fmt.Sprintf("bitpix%d", bitpix), func(b *testing.B) { benchmarkRows(b, benchImage(b, bitpix)) })
	}
	b.Run("unsigned16", func(b *testing.B) { benchmarkRows(b, benchImage(b, 16, "BZERO   = 32768")) })
	b.Run("scaled16", func(b *testing.B) { benchmarkRows(b, benchImage(b, 16, "BZERO   = 3", "BSCALE  = 0.5")) })
	b.Run("blank16", func(b *testing.B) { benchmarkRows(b, benchImage(b, 16, "BLANK   = 5")) })
}

func benchImage(b *testing.B, bitpix int, cards ...string) *Image {
	b.Helper()
	sample := max(bitpix, -bitpix) / 8
	raw := make([]byte, benchWidth*benchRows*sample)
	for i := range raw {
		raw[i] = byte(i * i >> 8 & 0x3f) // no float is a NaN
	}
	f := openTest(b, writeTemp(b, "bench.fits", join(headerBytes(append(primary(bitpix, benchWidth, benchRows), cards...)...), raw)))
	im, err := f.FirstImage()
	if err != nil {
		b.Fatal(err)
	}
	return im
}

func benchmarkRows(b *testing.B, im *Image) {
	b.Helper()
	dst := make([]float32, benchWidth*benchStrip)
	b.SetBytes(benchWidth * benchRows * im.sample)
	b.ReportAllocs()
	for b.Loop() {
		for y := 0; y < benchRows; y += benchStrip {
			if err := im.ReadRows(dst, y, y+benchStrip); err != nil {
				b.Fatal(err)
			}
		}
	}
}

// BenchmarkReadPlain is the reading without the conversion.
func BenchmarkReadPlain(b *testing.B) {
	im := benchImage(b, 16)
	fd, err := os.Open(im.file.path)
	if err != nil {
		b.Fatal(err)
	}
	defer fd.Close()
	raw := make([]byte, benchWidth*benchStrip*2)
	b.SetBytes(benchWidth * benchRows * 2)
	for b.Loop() {
		for y := 0; y < benchRows; y += benchStrip {
			if _, err := fd.ReadAt(raw, im.offset+int64(y)*benchWidth*2); err != nil {
				b.Fatal(err)
			}
		}
	}
}

// BenchmarkCopy copies as many bytes in memory, from a large array into one strip.
func BenchmarkCopy(b *testing.B) {
	src, dst := make([]byte, benchWidth*benchRows*2), make([]byte, benchWidth*benchStrip*2)
	b.SetBytes(int64(len(src)))
	for b.Loop() {
		for at := 0; at < len(src); at += len(dst) {
			copy(dst, src[at:])
		}
	}
}
