package extract

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rowfile"
)

// The sections of the cache of a cube, by detector row.
const (
	cachedSignal   = iota // [element][wavelength], as in the cube
	cachedVariance        // likewise
	cachedFlags           // likewise, int16
	cachedScale           // likewise
	cachedLight           // [element][column]: lightReader.row
	cachedTotal           // float64 [column]: rowLight.total
	cachedShared          // float64 [column]: rowLight.shared
)

// rowsForm is the version of what the sections mean. Whoever changes how light is rebuilt
// changes it, so that caches of other versions are made anew.
const rowsForm = "mirrorloom rows 1"

// rowsLayout is that of the cube's cache. A cube without a detector of its own, or whose
// unit tells nothing of electrons, has no light.
func (c *Cube) rowsLayout() rowfile.Layout {
	n, channels := c.Elements, c.Grid.Count
	l := rowfile.Layout{Identity: rowsForm + " of " + c.SHA, Rows: c.Rows, Sections: []rowfile.Section{
		{Name: product.Signal, Records: n, Bytes: 4 * channels},
		{Name: product.Variance, Records: n, Bytes: 4 * channels},
		{Name: product.FlagsImage, Records: n, Bytes: 2 * channels},
		{Name: product.Scale, Records: n, Bytes: 4 * channels},
	}}
	if c.hasLight() {
		l.Sections = append(l.Sections,
			rowfile.Section{Name: "LIGHT", Records: n, Bytes: 4 * c.noise.Columns},
			rowfile.Section{Name: "TOTAL", Records: 1, Bytes: 8 * c.noise.Columns},
			rowfile.Section{Name: "SHARED", Records: 1, Bytes: 8 * c.noise.Columns})
	}
	return l
}

func (c *Cube) hasLight() bool { return c.members == nil && c.knowsElectrons() }

// rowsPath is the cache's name in a folder.
func (c *Cube) rowsPath(dir string) string { return filepath.Join(dir, "rows-"+c.SHA[:16]) }

// RowsBytes is how large the cache of the cube and of its runs is.
func (c *Cube) RowsBytes() int64 {
	sum := c.rowsLayout().Size()
	for _, m := range c.members {
		sum += m.RowsBytes()
	}
	return sum
}

// MakeRows makes the cache of the cube, and of its runs, in dir, unless it is there: the
// voxels row by row, so that those of an aperture lie together, with the light behind them
// that errors need. It holds some tens of MiB, whatever the cube's size. progress is called with
// rows. A cancelled context ends it and leaves no part of a file.
func (c *Cube) MakeRows(ctx context.Context, dir string, progress func(done, total int)) error {
	cubes := []*Cube{c}
	total := c.Rows
	for _, m := range c.members {
		cubes, total = append(cubes, m.Cube), total+m.Rows
	}
	done := 0
	for _, one := range cubes {
		at := done
		if err := one.makeRows(ctx, dir, func(row int) { progress(at+row, total) }); err != nil {
			return err
		}
		done += one.Rows
		progress(done, total)
	}
	return nil
}

func (c *Cube) makeRows(ctx context.Context, dir string, progress func(row int)) error {
	path, layout := c.rowsPath(dir), c.rowsLayout()
	if f, err := rowfile.Open(path, layout); err == nil {
		return f.Close()
	}
	w, err := rowfile.Create(path, layout)
	if err != nil {
		return fmt.Errorf("make the cache of %s: %w", c.Path(), err)
	}
	err = c.writeRows(ctx, w, progress)
	if err == nil {
		err = w.Commit()
	}
	if err != nil {
		return errors.Join(fmt.Errorf("make the cache of %s: %w", c.Path(), err), w.Abort())
	}
	return nil
}

// cachePieceBytes of rows are turned at a time.
const cachePieceBytes = 24 << 20

// voxelBytes of all images.
const voxelBytes = 4 + 4 + 2 + 4

func (c *Cube) writeRows(ctx context.Context, w *rowfile.Writer, progress func(row int)) error {
	row := c.Elements * c.Grid.Count * voxelBytes
	rows := min(max(cachePieceBytes/row, 1), c.Rows)
	piece := make([]byte, rows*row)
	plane := make([]float32, rows*c.Elements)
	var light lightRows
	if c.hasLight() {
		light = c.newLightReader(nil)
	}
	for y0 := 0; y0 < c.Rows; y0 += rows {
		n := min(rows, c.Rows-y0)
		parts, err := c.turn(ctx, piece, plane, y0, n)
		if err != nil {
			return err
		}
		for y := y0; y < y0+n; y++ {
			if err := ctx.Err(); err != nil {
				return err
			}
			var sections [][]byte
			for _, p := range parts {
				size := len(p) / n
				sections = append(sections, p[(y-y0)*size:(y-y0+1)*size])
			}
			if light != nil {
				if sections, err = appendLight(sections, light, y); err != nil {
					return err
				}
			}
			if err := w.WriteRow(sections...); err != nil {
				return err
			}
			progress(y + 1)
		}
	}
	return nil
}

// turn gives rows y0..y0+n-1 of every image as [row][element][wavelength], in piece.
func (c *Cube) turn(ctx context.Context, piece []byte, plane []float32, y0, n int) ([][]byte, error) {
	scale, err := c.file.ImageNamed(product.Scale)
	if err != nil {
		return nil, err
	}
	channels := c.Grid.Count
	plane = plane[:n*c.Elements]
	var parts [][]byte
	for i, im := range c.images(scale) {
		size := 4
		if i == cachedFlags {
			size = 2
		}
		part := piece[:len(plane)*channels*size]
		piece = piece[len(part):]
		for l := range channels {
			if err := ctx.Err(); err != nil {
				return nil, err
			}
			if err := im.ReadPlaneRows(plane, l, y0, y0+n); err != nil {
				return nil, err
			}
			for k, v := range plane {
				at := part[(k*channels+l)*size:]
				if size == 2 {
					binary.LittleEndian.PutUint16(at, uint16(int16(v)))
				} else {
					binary.LittleEndian.PutUint32(at, math.Float32bits(v))
				}
			}
		}
		parts = append(parts, part)
	}
	return parts, nil
}

// appendLight appends the sections of the light of a row.
func appendLight(sections [][]byte, light lightRows, y int) ([][]byte, error) {
	l, err := light.some(y, nil)
	if err != nil {
		return nil, err
	}
	var all []byte
	for _, row := range l.of {
		for _, v := range row {
			all = binary.LittleEndian.AppendUint32(all, math.Float32bits(v))
		}
	}
	sections = append(sections, all)
	for _, sums := range [][]float64{l.total, l.shared} {
		var part []byte
		for _, v := range sums {
			part = binary.LittleEndian.AppendUint64(part, math.Float64bits(v))
		}
		sections = append(sections, part)
	}
	return sections, nil
}

// Rows is an open cache of a cube and of its runs.
type Rows struct{ files map[string]*rowfile.File }

// OpenRows opens the cache that MakeRows made in dir. Errors are those of rowfile.Open:
// fs.ErrNotExist, rowfile.ErrOther, rowfile.ErrDamaged.
func (c *Cube) OpenRows(dir string) (*Rows, error) {
	r := &Rows{map[string]*rowfile.File{}}
	cubes := []*Cube{c}
	for _, m := range c.members {
		cubes = append(cubes, m.Cube)
	}
	for _, one := range cubes {
		f, err := rowfile.Open(one.rowsPath(dir), one.rowsLayout())
		if err != nil {
			return nil, errors.Join(err, r.Close())
		}
		r.files[one.SHA] = f
	}
	return r, nil
}

// RemoveRows removes the cache of the cube and of its runs from dir.
func (c *Cube) RemoveRows(dir string) error {
	err := removeFile(c.rowsPath(dir))
	for _, m := range c.members {
		err = errors.Join(err, m.RemoveRows(dir))
	}
	return err
}

// Close ends the use of the cache.
func (r *Rows) Close() error {
	var err error
	for _, f := range r.files {
		err = errors.Join(err, f.Close())
	}
	return err
}

// WithRows is c reading from its cache. Both share c's file; the results are the same.
func (c *Cube) WithRows(r *Rows) *Cube {
	other := *c
	other.cached = &cachedRows{c, r.files[c.SHA]}
	if c.members != nil {
		other.members = make([]member, len(c.members))
		for i, m := range c.members {
			other.members[i] = member{m.WithRows(r), m.element, m.row}
		}
	}
	return &other
}
