package view

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"sync"
	"sync/atomic"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rowfile"
)

// Viewer is an open run. Any number of goroutines may use it.
type Viewer struct {
	name   string
	dir    string // of the cube
	schema product.Schema
	unit   string
	file   *fitsutil.File
	images images
	plain  *extract.Cube // reads the cube's own images
	run    *product.Run  // nil where there is no run.json
	ledger product.Ledger
	sky    []float64 // vacuum nm of channels dominated by lines of the sky

	folder *folder
	rows   atomic.Pointer[extract.Cube] // reads the cache of rows; nil until it is made
	sums   atomic.Pointer[rowfile.File] // sums of groups; nil until they are made
	slots  chan struct{}                // computations at a time
	busy   atomic.Int64                 // answers that are being computed
	mu     sync.Mutex
	opened []io.Closer // to be closed with the viewer
	work   sync.WaitGroup
}

// atOnce computations run; the others wait.
const atOnce = 2

// Open opens the run in a folder that reduce or combine wrote, or its cube.fits, and
// begins to make what is kept of it, which goes on until ctx ends or Close is called. The
// errors name the file and the cure.
func Open(ctx context.Context, run string) (*Viewer, error) {
	v, err := open(run)
	if err != nil {
		return nil, err
	}
	v.folder = chooseFolder(v.dir)
	ctx, v.folder.stop = context.WithCancel(ctx)
	v.work.Go(func() { v.keep(ctx) })
	return v, nil
}

// open is Open without the folder.
func open(run string) (*Viewer, error) {
	c, err := extract.Open(run)
	if err != nil {
		return nil, err
	}
	v := &Viewer{plain: c, dir: filepath.Dir(c.Path()), unit: c.Unit, slots: make(chan struct{}, atOnce), opened: []io.Closer{c}}
	if err := v.read(); err != nil {
		v.close() // only read from
		return nil, err
	}
	return v, nil
}

func (v *Viewer) read() (err error) {
	if v.file, err = fitsutil.Open(v.plain.Path()); err != nil {
		return err
	}
	v.opened = append(v.opened, v.file)
	if v.images, err = openImages(v.file); err != nil {
		return err
	}
	if v.schema, err = product.ReadSchema(v.images.signal.Header, v.images.signal.Axes); err != nil {
		return fmt.Errorf("%s: %w", v.file.Path(), err)
	}
	absolute, err := filepath.Abs(v.dir)
	if err != nil {
		return err
	}
	v.name = filepath.Base(absolute)
	if v.schema.Object, err = v.file.HDUs()[0].Header.Str("OBJECT"); err != nil {
		v.schema.Object = ""
	}
	v.run, err = product.ReadRun(filepath.Join(v.dir, product.RunFile))
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	v.ledger, err = product.ReadLedger(filepath.Join(v.dir, product.LedgerFile))
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return v.readSkyLines()
}

func (v *Viewer) readSkyLines() error {
	done, err := product.ReadOnSky(v.file)
	if err != nil || done.Sky == nil {
		return err
	}
	for l, line := range done.Sky.Line {
		if line {
			v.sky = append(v.sky, v.schema.Grid.WavelengthNM(float64(l)))
		}
	}
	return nil
}

// cube reads spectra the fastest way there is.
func (v *Viewer) cube() *extract.Cube {
	if c := v.rows.Load(); c != nil {
		return c
	}
	return v.plain
}

// CacheBytes is how large what is kept of the run is.
func (v *Viewer) CacheBytes() int64 { return v.plain.RowsBytes() + v.sumsLayout().Size() }

// Close ends what is being made, and the use of the run. No request may be under way.
func (v *Viewer) Close() error {
	v.folder.stop()
	v.work.Wait()
	return v.close()
}

func (v *Viewer) close() error {
	v.mu.Lock()
	defer v.mu.Unlock()
	var err error
	for i := len(v.opened) - 1; i >= 0; i-- {
		err = errors.Join(err, v.opened[i].Close())
	}
	v.opened = nil
	return err
}

// later closes something with the viewer.
func (v *Viewer) later(c io.Closer) {
	v.mu.Lock()
	defer v.mu.Unlock()
	v.opened = append(v.opened, c)
}

// turn waits for the right to compute; the caller calls done when it has.
func (v *Viewer) turn(ctx context.Context) (done func(), err error) {
	select {
	case v.slots <- struct{}{}:
		return func() { <-v.slots }, nil
	case <-ctx.Done():
		return nil, ctx.Err()
	}
}

// writable tells whether files can be made in a folder, which is made if it lacks.
func writable(dir string) bool {
	if os.MkdirAll(dir, 0o755) != nil {
		return false
	}
	f, err := os.CreateTemp(dir, ".try.*.part")
	if err != nil {
		return false
	}
	f.Close() // empty
	return os.Remove(f.Name()) == nil
}

// Progress says how far what is kept of the run is.
func (v *Viewer) Progress() Progress { return v.folder.progress() }
