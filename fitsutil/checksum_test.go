package fitsutil

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math/rand/v2"
	"os"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// Source: FITS 4.0 appendix J.3, see testdata/checksum.md.
func TestEncodeChecksumStandardExample(t *testing.T) {
	require.Equal(t, "hcHjjc9ghcEghc9g", encodeChecksum(868229149))
}

// example is an HDU of testdata/checksum.md.
type example struct {
	cards  []string
	data   []byte
	sha256 string
}

func readExample(t *testing.T, name string) example {
	t.Helper()
	text, err := os.ReadFile("testdata/checksum.md")
	require.NoError(t, err)
	_, block, found := strings.Cut(string(text), "```"+name+"\n")
	require.True(t, found)
	block, _, found = strings.Cut(block, "\n```")
	require.True(t, found)
	var e example
	for _, line := range strings.Split(block, "\n") {
		switch {
		case strings.HasPrefix(line, "data "):
			e.data, err = hex.DecodeString(line[5:])
			require.NoError(t, err)
		case strings.HasPrefix(line, "sha256 "):
			e.sha256 = line[7:]
		default:
			e.cards = append(e.cards, line)
		}
	}
	return e
}

// bytes is the whole HDU.
func (e example) bytes() []byte {
	var out bytes.Buffer
	for _, card := range e.cards {
		fmt.Fprintf(&out, "%-80s", card)
	}
	out.WriteString(strings.Repeat(" ", int(padding(int64(out.Len())))))
	out.Write(e.data)
	out.Write(make([]byte, padding(int64(out.Len()))))
	return out.Bytes()
}

// The writer's own headers, structure cards included, must give the examples
// byte for byte; only the comment of the two sums is the examples' own.
func TestChecksumExamplesByteForByte(t *testing.T) {
	signed := make([]int16, 12)
	for i := range signed {
		signed[i] = int16(1000*i - 5000)
	}
	cases := []struct {
		name  string
		shape imageShape
		extra *Header
		data  any
	}{
		{"hdu1", imageShape{bitpix: 16, axes: []int{4, 3}, primary: true}, NewHeader(Card{"OBJECT", "CHECK", ""}), signed},
		{"hdu2", imageShape{bitpix: 16, unsigned: true, axes: []int{3, 2}, primary: true}, nil, []uint16{0, 1, 32767, 32768, 40000, 65535}},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			e := readExample(t, c.name)
			whole := e.bytes()
			require.Equal(t, e.sha256, fmt.Sprintf("%x", sha256.Sum256(whole)), "the example itself")
			require.Equal(t, uint32(0xFFFFFFFF), sumRun(0, whole))

			header, samples, err := imageHeader(c.shape, c.extra)
			require.NoError(t, err)
			for _, key := range []string{"CHECKSUM", "DATASUM"} {
				header.entries[header.index[key]].card.Comment = "fixed"
			}
			data := make([]byte, samples*2)
			putSamples(data, c.data, 0, int(samples))
			require.Equal(t, e.data, data)
			got, err := sealHeader(header, sumRun(0, data))
			require.NoError(t, err)
			got = append(got, data...)
			got = append(got, make([]byte, padding(int64(len(got))))...)
			require.Equal(t, e.sha256, fmt.Sprintf("%x", sha256.Sum256(got)))
			require.Equal(t, whole, got)
		})
	}
}

// naiveSum adds the words one by one, as appendix J.1 describes.
func naiveSum(p []byte) uint32 {
	p = append(bytes.Clone(p), make([]byte, (4-len(p)%4)%4)...)
	var sum uint64
	for ; len(p) > 0; p = p[4:] {
		sum += uint64(binary.BigEndian.Uint32(p))
		if sum > 0xFFFFFFFF {
			sum = sum&0xFFFFFFFF + 1
		}
	}
	return uint32(sum)
}

func TestSumRunAllShortLengths(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	p := make([]byte, 200)
	for n := range p {
		for i := range p {
			p[i] = byte(random.Uint32())
		}
		before := bytes.Clone(p)
		require.Equal(t, naiveSum(p[:n]), sumRun(0, p[:n]), "length %d", n)
		require.Equal(t, before, p)
	}
}

// Runs cut anywhere, so at any lane, and added in any order give the sum of
// the whole.
func TestLaneSumsAddInAnyOrder(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		whole := rapid.SliceOfN(rapid.Byte(), 0, 4000).Draw(t, "bytes")
		if rapid.Bool().Draw(t, "all ones") {
			for i := range whole {
				whole[i] = 0xFF
			}
		}
		base := 4 * rapid.Int64Range(0, 1<<40).Draw(t, "offset of the whole in words")
		var cuts []int
		for at := 0; at < len(whole); {
			at = min(len(whole), at+rapid.IntRange(1, 97).Draw(t, "run"))
			cuts = append(cuts, at)
		}
		type run struct{ from, to int }
		var runs []run
		from := 0
		for _, to := range cuts {
			runs = append(runs, run{from, to})
			from = to
		}
		var sum uint32
		for _, r := range rapid.Permutation(runs).Draw(t, "order") {
			sum = addSums(sum, sumRun(base+int64(r.from), whole[r.from:r.to]))
		}
		if want := naiveSum(whole); sum != want {
			t.Fatalf("sum of %d runs %#x, of the whole %#x", len(runs), sum, want)
		}
	})
}

// Whatever the sum, the encoded text brings the HDU to -0 and holds letters
// and digits only.
func TestEncodeChecksumClosesTheSum(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		sum := rapid.Uint32().Draw(t, "sum")
		zeros := sumRun(11, []byte("0000000000000000"))
		text := encodeChecksum(addSums(sum, zeros))
		for _, c := range []byte(text) {
			if !onlyBytes(string(c), "0123456789ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz") {
				t.Fatalf("%q holds %q", text, c)
			}
		}
		if got := addSums(sum, sumRun(11, []byte(text))); got != 0xFFFFFFFF {
			t.Fatalf("sum %#x with %q gives %#x", sum, text, got)
		}
	})
}

func BenchmarkSumRun(b *testing.B) {
	p := make([]byte, chunkBytes)
	for i := range p {
		p[i] = byte(i * 7)
	}
	b.SetBytes(int64(len(p)))
	for b.Loop() {
		sumRun(2, p)
	}
}
