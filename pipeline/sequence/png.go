package sequence

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"image"
	"image/color"
	"image/png"
)

// pngHeaderBytes reaches to the end of the IHDR chunk's fields that matter:
// signature 8, length 4, "IHDR" 4, width 4, height 4, depth 1, colour 1
// (PNG specification, third edition, sections 5.2 and 11.2.1).
const pngHeaderBytes = 26

var pngSignature = []byte("\x89PNG\r\n\x1a\n")

// EncodePNG gives the mask as a PNG of one bit a mirror, white on and black
// off. Equal masks give equal bytes.
func (m *Mask) EncodePNG() ([]byte, error) {
	img := &image.Paletted{
		Pix:    m.On,
		Stride: m.Columns,
		Rect:   image.Rect(0, 0, m.Columns, m.Rows),
		// Two colours make image/png write one bit a pixel.
		Palette: color.Palette{color.Gray{Y: 0}, color.Gray{Y: 255}},
	}
	var out bytes.Buffer
	// Rows repeat, so that the fastest compression is as small as any.
	e := png.Encoder{CompressionLevel: png.BestSpeed}
	if err := e.Encode(&out, img); err != nil {
		return nil, fmt.Errorf("encoding a mask of %d x %d mirrors: %w", m.Columns, m.Rows, err)
	}
	return out.Bytes(), nil
}

// DecodePNG reads a mask of exactly columns x rows mirrors from a PNG of one
// bit a pixel, white on. It refuses any other size or depth before it spends
// memory on the pixels.
func DecodePNG(data []byte, columns, rows int) (*Mask, error) {
	if len(data) < pngHeaderBytes || !bytes.Equal(data[:8], pngSignature) || string(data[12:16]) != "IHDR" {
		return nil, errors.New("it is no PNG")
	}
	w, h := binary.BigEndian.Uint32(data[16:20]), binary.BigEndian.Uint32(data[20:24])
	if int64(w) != int64(columns) || int64(h) != int64(rows) {
		return nil, fmt.Errorf("it has %d x %d pixels where the device has %d x %d mirrors", w, h, columns, rows)
	}
	if depth := data[24]; depth != 1 {
		return nil, fmt.Errorf("it has %d bits a pixel where a mask has 1", depth)
	}
	img, err := png.Decode(bytes.NewReader(data))
	if err != nil {
		return nil, fmt.Errorf("it cannot be decoded: %w", err)
	}
	m := &Mask{Columns: columns, Rows: rows, On: make([]uint8, columns*rows)}
	if err := m.fromImage(img); err != nil {
		return nil, err
	}
	return m, nil
}

// fromImage takes white as on and black as off; any other colour is an error.
func (m *Mask) fromImage(img image.Image) error {
	switch img := img.(type) {
	case *image.Gray:
		for y := range m.Rows {
			for x, g := range img.Pix[y*img.Stride : y*img.Stride+m.Columns] {
				m.On[y*m.Columns+x] = g & 1 // one bit deep: 0 or 255
			}
		}
		return nil
	case *image.Paletted:
		return m.fromPalette(img)
	}
	return errors.New("it is neither grey nor a palette of black and white")
}

func (m *Mask) fromPalette(img *image.Paletted) error {
	states := make([]uint8, len(img.Palette))
	for i, c := range img.Palette {
		switch r, g, b, a := c.RGBA(); {
		case a == 0xffff && r == 0xffff && g == 0xffff && b == 0xffff:
			states[i] = 1
		case a == 0xffff && r == 0 && g == 0 && b == 0:
		default:
			return fmt.Errorf("its palette holds a colour that is neither black nor white")
		}
	}
	for y := range m.Rows {
		for x, p := range img.Pix[y*img.Stride : y*img.Stride+m.Columns] {
			if int(p) >= len(states) {
				return errors.New("a pixel lies outside its palette")
			}
			m.On[y*m.Columns+x] = states[p]
		}
	}
	return nil
}
