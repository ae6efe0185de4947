package extract

import (
	"context"
	"encoding/binary"
	"errors"
	"io/fs"
	"math"
	"os"
	"path/filepath"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/rowfile"
)

// images are those of the cache, in its order.
func (c *Cube) images(scale *fitsutil.Image) []*fitsutil.Image {
	return []*fitsutil.Image{cachedSignal: c.signal, cachedVariance: c.variance, cachedFlags: c.flags, cachedScale: scale}
}

func removeFile(path string) error {
	if err := os.Remove(path); !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return nil
}

// cachedRows reads the cache of a cube.
type cachedRows struct {
	c    *Cube
	file *rowfile.File
}

func (r *cachedRows) light(electrons []float64) lightRows {
	if electrons != nil || !r.c.hasLight() {
		return r.c.newLightReader(electrons)
	}
	return &cachedLightRows{r.c, r.file, nil}
}

func (r *cachedRows) spectra(ctx context.Context, a *aperture, from, to int) error {
	for i := 0; i < len(a.cells); {
		if err := ctx.Err(); err != nil {
			return err
		}
		end := i + 1
		for end < len(a.cells) && a.cells[end].row == a.cells[i].row && a.cells[end].element == a.cells[end-1].element+1 {
			end++
		}
		if err := r.run(a, i, end, from, to); err != nil {
			return err
		}
		i = end
	}
	return nil
}

// run reads cells i..end-1, neighbours in a row.
func (r *cachedRows) run(a *aperture, i, end, from, to int) error {
	first, channels := a.cells[i], r.c.Grid.Count
	raw := make([]byte, (end-i)*4*channels)
	for section, dst := range [][][]float32{cachedSignal: a.signal, cachedVariance: a.variance} {
		if err := r.file.ReadRecords(raw, first.row, section, first.element, end-i); err != nil {
			return err
		}
		for k := i; k < end; k++ {
			floats(dst[k][from:to], raw[4*((k-i)*channels+from):])
		}
	}
	raw = raw[:len(raw)/2]
	if err := r.file.ReadRecords(raw, first.row, cachedFlags, first.element, end-i); err != nil {
		return err
	}
	for k := i; k < end; k++ {
		part := raw[2*(k-i)*channels:]
		for l := from; l < to; l++ {
			a.flags[k][l] = int16(binary.LittleEndian.Uint16(part[2*l:]))
		}
	}
	return nil
}

// floats reads as many as dst holds.
func floats(dst []float32, raw []byte) {
	raw = raw[:4*len(dst)]
	for i := range dst {
		dst[i] = math.Float32frombits(binary.LittleEndian.Uint32(raw[4*i:]))
	}
}

// cachedLightRows reads the light of a pass.
type cachedLightRows struct {
	c    *Cube
	file *rowfile.File
	raw  []byte
}

func (r *cachedLightRows) row(y int) ([][]float32, error) {
	columns := r.c.noise.Columns
	light := table[float32](r.c.Elements, columns)
	if err := r.read(light, y, 0, r.c.Elements); err != nil {
		return nil, err
	}
	return light, nil
}

// read fills the rows of elements first..first+n-1.
func (r *cachedLightRows) read(light [][]float32, y, first, n int) error {
	size := 4 * r.c.noise.Columns
	if len(r.raw) < n*size {
		r.raw = make([]byte, n*size)
	}
	if err := r.file.ReadRecords(r.raw[:n*size], y, cachedLight, first, n); err != nil {
		return err
	}
	for i := range n {
		floats(light[first+i], r.raw[i*size:])
	}
	return nil
}

func (r *cachedLightRows) some(y int, elements []int) (l *rowLight, err error) {
	l = new(rowLight)
	columns := r.c.noise.Columns
	if elements == nil {
		if l.of, err = r.row(y); err != nil {
			return nil, err
		}
	} else {
		l.of = make([][]float32, r.c.Elements)
		memory := table[float32](len(elements), columns)
		for i, j := range elements {
			l.of[j] = memory[i]
		}
		for i := 0; i < len(elements); {
			n := 1
			for i+n < len(elements) && elements[i+n] == elements[i]+n {
				n++
			}
			if err := r.read(l.of, y, elements[i], n); err != nil {
				return nil, err
			}
			i += n
		}
	}
	for section, dst := range map[int]*[]float64{cachedTotal: &l.total, cachedShared: &l.shared} {
		raw := make([]byte, 8*columns)
		if err := r.file.ReadRecords(raw, y, section, 0, 1); err != nil {
			return nil, err
		}
		*dst = make([]float64, columns)
		for x := range *dst {
			(*dst)[x] = math.Float64frombits(binary.LittleEndian.Uint64(raw[8*x:]))
		}
	}
	return l, nil
}

// RowsNames are the names of the files that MakeRows makes.
func (c *Cube) RowsNames() []string {
	names := []string{filepath.Base(c.rowsPath(""))}
	for _, m := range c.members {
		names = append(names, m.RowsNames()...)
	}
	return names
}
