package skyflux

import (
	"fmt"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// Source is a finished cube.fits, read plane by plane.
type Source struct {
	file                           *fitsutil.File
	signal, variance, flags, scale *fitsutil.Image
	Elements, Rows, Voxels         int
}

// Open opens a cube. Errors name the file and the cure.
func Open(path string) (*Source, error) {
	file, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	s := &Source{file: file}
	for _, im := range []struct {
		name string
		to   **fitsutil.Image
	}{{product.Signal, &s.signal}, {product.Variance, &s.variance}, {product.FlagsImage, &s.flags}, {product.Scale, &s.scale}} {
		if *im.to, err = file.ImageNamed(im.name); err == nil && (len((*im.to).Axes) != 3 || !slices.Equal((*im.to).Axes, s.signal.Axes)) {
			err = fmt.Errorf("%s: image %s has the axes %v; make the cube again with reduce", path, im.name, (*im.to).Axes)
		}
		if err != nil {
			file.Close() // only read from
			return nil, err
		}
	}
	s.Elements, s.Rows, s.Voxels = s.signal.Width(), s.signal.Height(), s.signal.Planes()
	return s, nil
}

// CountInto has what is read of the cube add to t.
func (s *Source) CountInto(t *fitsutil.Traffic) { s.file.CountInto(t) }

// Close ends the use of the cube.
func (s *Source) Close() error { return s.file.Close() }

func (s *Source) places() int { return s.Elements * s.Rows }

// plane is one wavelength, [row][element].
type plane struct {
	signal, variance, scratch []float32
	flags                     []calib.Flag
}

func (s *Source) newPlane() *plane {
	n := s.places()
	return &plane{signal: make([]float32, n), variance: make([]float32, n), scratch: make([]float32, n), flags: make([]calib.Flag, n)}
}

// planeBytes is the memory of a plane, for each place.
const planeBytes = 3*4 + 2

// read fills p with plane l.
func (s *Source) read(p *plane, l int) error {
	if err := s.signal.ReadPlaneRows(p.signal, l, 0, s.Rows); err != nil {
		return err
	}
	if err := s.variance.ReadPlaneRows(p.variance, l, 0, s.Rows); err != nil {
		return err
	}
	if err := s.flags.ReadPlaneRows(p.scratch, l, 0, s.Rows); err != nil {
		return err
	}
	for i, f := range p.scratch {
		p.flags[i] = calib.Flag(f)
	}
	return nil
}

// good tells whether the voxel of place i may be used.
func (p *plane) good(i int) bool {
	v := p.signal[i]
	return p.flags[i]&product.FlagBad == 0 && v == v && p.variance[i] > 0
}

// Primary is the primary header.
func (s *Source) Primary() *fitsutil.Header { return s.file.HDUs()[0].Header }

// Table reads a table of the cube.
func (s *Source) Table(name string) (*fitsutil.Table, error) { return s.file.Table(name) }

// Schema is the cube's shape and place.
func (s *Source) Schema() (product.Schema, error) {
	schema, err := product.ReadSchema(s.signal.Header, s.signal.Axes)
	if err != nil {
		return schema, fmt.Errorf("%s: %w", s.file.Path(), err)
	}
	return schema, nil
}

// Unit is BUNIT of SIGNAL.
func (s *Source) Unit() string {
	unit, _ := s.signal.Header.Str("BUNIT") // empty is no unit that serves
	return unit
}

// Subtracted tells whether the sky was taken off already.
func (s *Source) Subtracted() bool {
	done, err := product.ReadOnSky(s.file)
	return err == nil && done.Sky != nil
}
