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
	on, err := statesOf(img)
	if err != nil {
		return nil, err
	}
	return &Mask{Columns: columns, Rows: rows, On: on}, nil
}

// statesOf takes white as on and black as off; any other colour is an error. A
// decoded image has its pixels without gaps, and they are its own: they are
// changed in place.
func statesOf(img image.Image) ([]uint8, error) {
	switch img := img.(type) {
	case *image.Gray:
		for i, g := range img.Pix {
			img.Pix[i] = g & 1 // one bit deep: 0 or 255
		}
		return img.Pix, nil
	case *image.Paletted:
		states, err := statesOfPalette(img.Palette)
		if err != nil {
			return nil, err
		}
		for i, p := range img.Pix {
			img.Pix[i] = states[p]
		}
		return img.Pix, nil
	}
	return nil, errors.New("it is neither grey nor a palette of black and white")
}

func statesOfPalette(palette color.Palette) (states [256]uint8, err error) {
	for i, c := range palette {
		switch r, g, b, a := c.RGBA(); {
		case a == 0xffff && r == 0xffff && g == 0xffff && b == 0xffff:
			states[i] = 1
		case a == 0xffff && r == 0 && g == 0 && b == 0:
		default:
			return states, errors.New("its palette holds a colour that is neither black nor white")
		}
	}
	return states, nil
}
