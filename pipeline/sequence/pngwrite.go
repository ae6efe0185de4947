package sequence

import (
	"bytes"
	"compress/zlib"
	"encoding/binary"
	"fmt"
	"hash/crc32"
)

// EncodePNG gives the mask as a greyscale PNG of one bit a mirror, white on and
// black off (PNG specification, third edition, W3C 2025, sections 5 and 11).
// Equal masks give equal bytes.
//
// image/png would take ten times as long, pixel by pixel, and thousands of
// masks are written; reading is image/png's.
func (m *Mask) EncodePNG() ([]byte, error) {
	header := make([]byte, 13)
	binary.BigEndian.PutUint32(header[0:], uint32(m.Columns))
	binary.BigEndian.PutUint32(header[4:], uint32(m.Rows))
	header[8] = 1 // bit depth; colour type 0, no interlace and the only methods follow
	pixels, err := m.deflate()
	if err != nil {
		return nil, fmt.Errorf("encoding a mask of %d x %d mirrors: %w", m.Columns, m.Rows, err)
	}
	out := append(make([]byte, 0, len(pixels)+64), pngSignature...)
	out = appendChunk(out, "IHDR", header)
	out = appendChunk(out, "IDAT", pixels)
	return appendChunk(out, "IEND", nil), nil
}

// appendChunk appends length, type, data and the CRC of type and data.
func appendChunk(out []byte, kind string, data []byte) []byte {
	out = binary.BigEndian.AppendUint32(out, uint32(len(data)))
	start := len(out)
	out = append(out, kind...)
	out = append(out, data...)
	return binary.BigEndian.AppendUint32(out, crc32.ChecksumIEEE(out[start:]))
}

// deflate compresses the packed rows, each behind a filter byte of 0 (none):
// rows repeat as they are, or shifted by a mirror, which the compression finds
// without a filter's help and at its fastest.
func (m *Mask) deflate() ([]byte, error) {
	var out bytes.Buffer
	z, err := zlib.NewWriterLevel(&out, zlib.BestSpeed)
	if err != nil {
		return nil, err
	}
	packed := make([]byte, 1+(m.Columns+7)/8)
	for y := range m.Rows {
		row := m.On[y*m.Columns : (y+1)*m.Columns]
		if y == 0 || !bytes.Equal(row, m.On[(y-1)*m.Columns:y*m.Columns]) {
			pack(packed[1:], row)
		}
		if _, err := z.Write(packed); err != nil {
			return nil, err
		}
	}
	if err := z.Close(); err != nil {
		return nil, err
	}
	return out.Bytes(), nil
}

// pack puts eight states of 0 or 1 into a byte, the first in the highest bit;
// what is left over of the last byte is 0.
func pack(dst, states []byte) {
	// Byte i of the little-endian word, 0 or 1, is to become bit 7-i of the
	// product's highest byte: the factor has bit 63-i-8i for each i, and no two
	// terms meet, so that nothing carries.
	const gather = 1<<63 | 1<<54 | 1<<45 | 1<<36 | 1<<27 | 1<<18 | 1<<9 | 1
	for len(states) >= 8 {
		dst[0] = byte(binary.LittleEndian.Uint64(states) * gather >> 56)
		dst, states = dst[1:], states[8:]
	}
	if len(states) > 0 {
		dst[0] = 0
		for i, state := range states {
			dst[0] |= state << (7 - i)
		}
	}
}
