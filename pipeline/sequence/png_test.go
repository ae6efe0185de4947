package sequence

import (
	"bytes"
	"image"
	"image/color"
	"image/png"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// Any mask comes back from its PNG, by this package's reader and by image/png.
func TestPNGRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		m := &Mask{Columns: rapid.IntRange(1, 70).Draw(t, "columns"), Rows: rapid.IntRange(1, 9).Draw(t, "rows")}
		size := m.Columns * m.Rows
		m.On = rapid.SliceOfN(rapid.Uint8Range(0, 1), size, size).Draw(t, "on")
		data, err := m.EncodePNG()
		require.NoError(t, err)
		again, err := m.EncodePNG()
		require.NoError(t, err)
		require.Equal(t, data, again)
		back, err := DecodePNG(data, m.Columns, m.Rows)
		require.NoError(t, err)
		require.Equal(t, m, back)
		img, err := png.Decode(bytes.NewReader(data))
		require.NoError(t, err)
		for i, state := range m.On {
			r, _, _, _ := img.At(i%m.Columns, i/m.Columns).RGBA()
			require.Equal(t, uint32(state)*0xffff, r)
		}
	})
}

// A mask of one mirror, on: its digest is SHA-256 of the byte 1, whose first
// digits are 4bf5122f344554c5 (sha256sum of coreutils: printf '\1' | sha256sum).
func TestMaskID(t *testing.T) {
	require.Equal(t, "4bf5122f344554c5", (&Mask{Columns: 1, Rows: 1, On: []uint8{1}}).ID())
}

func TestDecodePNGRefuses(t *testing.T) {
	encode := func(img image.Image) []byte {
		var out bytes.Buffer
		require.NoError(t, png.Encode(&out, img))
		return out.Bytes()
	}
	rect := image.Rect(0, 0, 9, 2)
	black, err := (&Mask{Columns: 9, Rows: 2, On: make([]uint8, 18)}).EncodePNG()
	require.NoError(t, err)
	huge := bytes.Clone(black)
	copy(huge[16:], []byte{0x7f, 0xff, 0xff, 0xff, 0x7f, 0xff, 0xff, 0xff})
	spoilt := bytes.Clone(black)
	spoilt[45] ^= 0x10
	for name, c := range map[string]struct {
		data []byte
		want string
	}{
		"nothing":     {nil, "no PNG"},
		"text":        {[]byte("this is certainly no picture"), "no PNG"},
		"eight bits":  {encode(image.NewGray(rect)), "8 bits a pixel"},
		"two bits":    {encode(image.NewPaletted(rect, color.Palette{color.Black, color.White, color.Gray{Y: 9}})), "2 bits a pixel"},
		"wider":       {encode(image.NewGray(image.Rect(0, 0, 10, 2))), "10 x 2 pixels"},
		"huge":        {huge, "2147483647 x 2147483647 pixels"},
		"red":         {encode(image.NewPaletted(rect, color.Palette{color.Black, color.RGBA{R: 255, A: 255}})), "neither black nor white"},
		"transparent": {encode(image.NewPaletted(rect, color.Palette{color.Black, color.Transparent})), "neither black nor white"},
		"cut off":     {black[:len(black)-20], "cannot be decoded"},
		"spoilt":      {spoilt, "cannot be decoded"},
	} {
		m, err := DecodePNG(c.data, 9, 2)
		require.ErrorContains(t, err, c.want, name)
		require.Nil(t, m, name)
	}
}

// FuzzDecodePNG: no bytes make the reader panic or give a state but 0 and 1.
func FuzzDecodePNG(f *testing.F) {
	m := &Mask{Columns: 11, Rows: 3, On: make([]uint8, 33)}
	for i := range m.On {
		m.On[i] = uint8(i * i % 7 % 2)
	}
	data, err := m.EncodePNG()
	require.NoError(f, err)
	f.Add(data)
	var paletted bytes.Buffer
	require.NoError(f, png.Encode(&paletted, image.NewPaletted(image.Rect(0, 0, 11, 3), color.Palette{color.White, color.Black})))
	f.Add(paletted.Bytes())
	f.Add([]byte{})
	f.Fuzz(func(t *testing.T, data []byte) {
		m, err := DecodePNG(data, 11, 3)
		if err != nil {
			require.Nil(t, m)
			return
		}
		require.Len(t, m.On, 33)
		for _, state := range m.On {
			require.LessOrEqual(t, state, uint8(1))
		}
	})
}
