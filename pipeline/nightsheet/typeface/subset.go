package typeface

import (
	"encoding/binary"
	"fmt"
	"slices"
)

// Tables that a browser needs of a TrueType font to draw it; positions of pairs and features
// are left out.
var kept = []string{"OS/2", "cmap", "cvt ", "fpgm", "glyf", "head", "hhea", "hmtx", "loca", "maxp", "name", "post", "prep"}

// Subset is the font as a TrueType file in which only the glyphs of some words, and those that
// these are made of, have an outline; all numbers of glyphs stay what they are. The format is
// that of the OpenType specification (ISO/IEC 14496-22): glyf holds the outlines, loca where
// each begins.
func (f *Face) Subset(words string) ([]byte, error) {
	tables, err := directory(f.data)
	if err != nil {
		return nil, err
	}
	used := map[int]bool{0: true}
	for _, r := range words {
		if glyph, err := f.font.GlyphIndex(&f.buffer, r); err == nil {
			used[int(glyph)] = true
		}
	}
	if err := subsetOutlines(tables, used); err != nil {
		return nil, err
	}
	return assemble(tables), nil
}

// directory finds the tables of a font.
func directory(data []byte) (map[string][]byte, error) {
	const head, entry = 12, 16
	if len(data) < head {
		return nil, fmt.Errorf("font of the night sheet: the file is cut off")
	}
	tables := map[string][]byte{}
	for i := range int(binary.BigEndian.Uint16(data[4:])) {
		at := head + i*entry
		if at+entry > len(data) {
			return nil, fmt.Errorf("font of the night sheet: the file is cut off")
		}
		first, size := int(binary.BigEndian.Uint32(data[at+8:])), int(binary.BigEndian.Uint32(data[at+12:]))
		if first+size > len(data) {
			return nil, fmt.Errorf("font of the night sheet: a table reaches beyond the file")
		}
		if tag := string(data[at : at+4]); slices.Contains(kept, tag) {
			tables[tag] = data[first : first+size]
		}
	}
	return tables, nil
}

// subsetOutlines rewrites glyf and loca, the latter in its long form.
func subsetOutlines(tables map[string][]byte, used map[int]bool) error {
	head, loca, glyf := slices.Clone(tables["head"]), tables["loca"], tables["glyf"]
	if len(head) < 54 || len(tables["maxp"]) < 6 {
		return fmt.Errorf("font of the night sheet: its head is cut off")
	}
	count := int(binary.BigEndian.Uint16(tables["maxp"][4:]))
	long := binary.BigEndian.Uint16(head[50:]) == 1
	outline := func(glyph int) []byte {
		at := func(i int) int {
			if long {
				return int(binary.BigEndian.Uint32(loca[4*i:]))
			}
			return 2 * int(binary.BigEndian.Uint16(loca[2*i:]))
		}
		return glyf[at(glyph):at(glyph+1)]
	}
	addParts(used, outline)
	var outlines, places []byte
	for glyph := range count {
		places = binary.BigEndian.AppendUint32(places, uint32(len(outlines)))
		if used[glyph] {
			outlines = append(outlines, outline(glyph)...)
			for len(outlines)%4 != 0 {
				outlines = append(outlines, 0)
			}
		}
	}
	binary.BigEndian.PutUint16(head[50:], 1)
	tables["head"], tables["glyf"] = head, outlines
	tables["loca"] = binary.BigEndian.AppendUint32(places, uint32(len(outlines)))
	return nil
}

// addParts adds the glyphs that used ones are made of.
func addParts(used map[int]bool, outline func(glyph int) []byte) {
	queue := make([]int, 0, len(used))
	for glyph := range used {
		queue = append(queue, glyph)
	}
	for len(queue) > 0 {
		data := outline(queue[0])
		queue = queue[1:]
		if len(data) < 10 || int16(binary.BigEndian.Uint16(data)) >= 0 {
			continue // of its own contours
		}
		// Flags of a part: words for its place, a scale, two, four; more parts follow.
		const words, scale, more, two, four = 0x1, 0x8, 0x20, 0x40, 0x80
		for at := 10; at+4 <= len(data); {
			flags, part := binary.BigEndian.Uint16(data[at:]), int(binary.BigEndian.Uint16(data[at+2:]))
			if !used[part] {
				used[part] = true
				queue = append(queue, part)
			}
			at += 6
			if flags&words != 0 {
				at += 2
			}
			switch {
			case flags&scale != 0:
				at += 2
			case flags&two != 0:
				at += 4
			case flags&four != 0:
				at += 8
			}
			if flags&more == 0 {
				break
			}
		}
	}
}

// assemble writes a font file of tables.
func assemble(tables map[string][]byte) []byte {
	var tags []string
	for tag := range tables {
		tags = append(tags, tag)
	}
	slices.Sort(tags)
	n := len(tags)
	power, log := 1, 0
	for power*2 <= n {
		power, log = power*2, log+1
	}
	out := binary.BigEndian.AppendUint32(nil, 0x00010000)
	for _, x := range []int{n, power * 16, log, (n - power) * 16} {
		out = binary.BigEndian.AppendUint16(out, uint16(x))
	}
	first := 12 + 16*n
	var body []byte
	for _, tag := range tags {
		data := tables[tag]
		if tag == "head" {
			binary.BigEndian.PutUint32(data[8:], 0) // the whole file's sum comes last
		}
		out = append(out, tag...)
		for _, x := range []uint32{sum(data), uint32(first + len(body)), uint32(len(data))} {
			out = binary.BigEndian.AppendUint32(out, x)
		}
		body = append(body, data...)
		for len(body)%4 != 0 {
			body = append(body, 0)
		}
	}
	out = append(out, body...)
	at := first
	for _, tag := range tags {
		if tag == "head" {
			binary.BigEndian.PutUint32(out[at+8:], 0xB1B0AFBA-sum(out))
		}
		at += (len(tables[tag]) + 3) / 4 * 4
	}
	return out
}

// sum adds up a table's words of 32 bits, filled up with zeros.
func sum(data []byte) uint32 {
	var total uint32
	for len(data) >= 4 {
		total += binary.BigEndian.Uint32(data)
		data = data[4:]
	}
	if len(data) > 0 {
		var last [4]byte
		copy(last[:], data)
		total += binary.BigEndian.Uint32(last[:])
	}
	return total
}
