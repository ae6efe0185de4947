package view

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/rowfile"
)

// groupPlanes are added up to one group: a band of any width takes the sums of its groups
// and at most so many planes at each end.
const groupPlanes = 16

// sumsForm is the version of what the sections mean.
const sumsForm = "mirrorloom sums 1"

// The sections of the sums, by group: a record a detector row.
const (
	sumSignal   = iota // float64
	sumVariance        // float64
	sumScale           // float64
	sumCount           // uint16
	sumFlags           // int16
	sumField           // one record: sum of the good voxels and their number of each plane, float64
)

func (v *Viewer) sumsLayout() rowfile.Layout {
	n, rows := v.schema.Elements, v.schema.Rows
	return rowfile.Layout{Identity: sumsForm + " of " + v.plain.SHA, Rows: v.groups(), Sections: []rowfile.Section{
		{Name: "SIGNAL", Records: rows, Bytes: 8 * n}, {Name: "VARIANCE", Records: rows, Bytes: 8 * n}, {Name: "SCALE", Records: rows, Bytes: 8 * n},
		{Name: "COUNT", Records: rows, Bytes: 2 * n}, {Name: "FLAGS", Records: rows, Bytes: 2 * n}, {Name: "FIELD", Records: 1, Bytes: 16 * groupPlanes},
	}}
}

func (v *Viewer) groups() int { return (v.schema.Grid.Count + groupPlanes - 1) / groupPlanes }

func sumsName(c *extract.Cube) string { return "sums-" + c.SHA[:16] }

func (v *Viewer) sumsPath() string { return filepath.Join(v.folder.path, sumsName(v.plain)) }

// makeSums makes the sums unless they are there, and opens them.
func (v *Viewer) makeSums(ctx context.Context, progress func(done, total int)) (*rowfile.File, error) {
	path, layout := v.sumsPath(), v.sumsLayout()
	if f, err := rowfile.Open(path, layout); err == nil {
		return f, nil
	}
	w, err := rowfile.Create(path, layout)
	if err != nil {
		return nil, fmt.Errorf("add up planes of %s: %w", v.file.Path(), err)
	}
	if err = v.writeSums(ctx, w, progress); err == nil {
		err = w.Commit()
	}
	if err != nil {
		return nil, errors.Join(fmt.Errorf("add up planes of %s: %w", v.file.Path(), err), w.Abort())
	}
	return rowfile.Open(path, layout)
}

func (v *Viewer) writeSums(ctx context.Context, w *rowfile.Writer, progress func(done, total int)) error {
	channels := v.schema.Grid.Count
	s := newBandSums(v.schema.Elements * v.schema.Rows)
	reader := v.images.newReader(true)
	for g := range v.groups() {
		s.clear()
		var field []byte
		for i := range groupPlanes {
			var sum float64
			var good int
			if l := g*groupPlanes + i; l < channels {
				var err error
				if sum, good, err = reader.add(ctx, s, l); err != nil {
					return err
				}
			}
			field = binary.LittleEndian.AppendUint64(field, math.Float64bits(sum))
			field = binary.LittleEndian.AppendUint64(field, math.Float64bits(float64(good)))
		}
		if err := w.WriteRow(floats(s.signal), floats(s.variance), floats(s.scale), words(s.count), words(s.flags), field); err != nil {
			return err
		}
		progress(min((g+1)*groupPlanes, channels), channels)
	}
	return nil
}

func floats(x []float64) []byte {
	raw := make([]byte, 8*len(x))
	for i, v := range x {
		binary.LittleEndian.PutUint64(raw[8*i:], math.Float64bits(v))
	}
	return raw
}

func words[T int16 | uint32](x []T) []byte {
	raw := make([]byte, 2*len(x))
	for i, v := range x {
		binary.LittleEndian.PutUint16(raw[2*i:], uint16(v))
	}
	return raw
}

// addGroup adds a group to s; scale only where it is wanted.
func (v *Viewer) addGroup(f *rowfile.File, s *bandSums, g int, scaled bool) error {
	rows, n := v.schema.Rows, v.schema.Elements
	raw := make([]byte, 8*n*rows)
	for section, dst := range [][]float64{sumSignal: s.signal, sumVariance: s.variance, sumScale: s.scale} {
		if section == sumScale && !scaled {
			continue
		}
		if err := f.ReadRecords(raw, g, section, 0, rows); err != nil {
			return err
		}
		for i := range dst {
			dst[i] += math.Float64frombits(binary.LittleEndian.Uint64(raw[8*i:]))
		}
	}
	raw = raw[:2*n*rows]
	if err := f.ReadRecords(raw, g, sumCount, 0, rows); err != nil {
		return err
	}
	for i := range s.count {
		s.count[i] += uint32(binary.LittleEndian.Uint16(raw[2*i:]))
	}
	if err := f.ReadRecords(raw, g, sumFlags, 0, rows); err != nil {
		return err
	}
	for i := range s.flags {
		s.flags[i] |= int16(binary.LittleEndian.Uint16(raw[2*i:]))
	}
	return nil
}
