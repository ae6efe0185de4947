package combine

import (
	"fmt"
	"path/filepath"
	"slices"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// member is a run that is to be combined, its cube open.
type member struct {
	name    string // as the caller calls it
	file    *fitsutil.File
	primary *fitsutil.Header
	// images are SIGNAL, VARIANCE, FLAGS and SCALE.
	images [4]*fitsutil.Image
	schema product.Schema
	ledger product.Ledger
	run    *product.Run
	// element and row are where its first voxel lies in the combined cube.
	element, row int
}

var imageNames = [4]string{product.Signal, product.Variance, product.FlagsImage, product.Scale}

// open opens a run's folder. The errors name the file and the cure.
func open(name string) (*member, error) {
	m := &member{name: name}
	var err error
	if m.file, err = fitsutil.Open(filepath.Join(name, product.CubeFile)); err != nil {
		return nil, fmt.Errorf("%w; combine takes folders that reduce wrote", err)
	}
	if err := m.read(); err != nil {
		m.file.Close() // only read from
		return nil, err
	}
	return m, nil
}

func (m *member) read() (err error) {
	if made, err := product.ReadMembers(m.file); err != nil || made != nil {
		if err == nil {
			err = fmt.Errorf("%s is made of %d runs already; combine the runs themselves, all at once", m.name, len(made))
		}
		return err
	}
	m.primary = m.file.HDUs()[0].Header
	for i, name := range imageNames {
		if m.images[i], err = m.file.ImageNamed(name); err != nil {
			return fmt.Errorf("%w; make the cube again with reduce", err)
		}
		if !slices.Equal(m.images[i].Axes, m.images[0].Axes) {
			return fmt.Errorf("%s: image %s has the axes %v, %s %v; make the cube again with reduce", m.file.Path(), name, m.images[i].Axes, product.Signal, m.images[0].Axes)
		}
	}
	if m.schema, err = product.ReadSchema(m.images[0].Header, m.images[0].Axes); err != nil {
		return fmt.Errorf("%s: %w", m.file.Path(), err)
	}
	m.schema.Object = m.card("OBJECT")
	if m.ledger, err = product.ReadLedger(filepath.Join(m.name, product.LedgerFile)); err != nil {
		return err
	}
	m.run, err = product.ReadRun(filepath.Join(m.name, product.RunFile))
	return err
}

// card is a text of the primary header or of SIGNAL's, empty where there is none.
func (m *member) card(key string) string {
	for _, h := range []*fitsutil.Header{m.primary, m.images[0].Header} {
		if h.Has(key) {
			for _, c := range h.Cards() {
				if c.Key == key {
					return fmt.Sprint(c.Value)
				}
			}
		}
	}
	return ""
}

// count is a number of the primary header, 0 where there is none.
func (m *member) count(key string) int {
	n, err := m.primary.Int(key)
	if err != nil {
		return 0
	}
	return int(n)
}

// dwell is the exposure time of the science frames, seconds; 0 without any.
func (m *member) dwell() float64 {
	for _, e := range m.ledger {
		if e.Step > 0 && e.Kind == string(sequence.Science) && e.Verdict.Used() {
			return e.ExptimeS
		}
	}
	return 0
}

// width and height are the numbers of elements and rows.
func (m *member) width() int  { return m.schema.Elements }
func (m *member) height() int { return m.schema.Rows }
