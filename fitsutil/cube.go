package fitsutil

import (
	"fmt"
	"sync"
	"sync/atomic"
)

// ImageSpec describes an image of a cube before its samples exist.
type ImageSpec struct {
	Name     string  // EXTNAME; empty only for a primary array
	Header   *Header // further cards, as in ImageData
	BITPIX   int     // 8, 16, 32, 64, -32 or -64
	Unsigned bool    // with BITPIX 16: samples are uint16, stored with BZERO = 32768
	Axes     []int   // FITS order: x, y and further axes, which count together as planes
}

// Cube is a FITS file whose images are written strip by strip, in any order
// and by any number of goroutines, and whose bytes do not depend on that
// order. Its room is reserved when it is created. It appears under its name at
// Commit; until then it is a temporary file beside it.
type Cube struct {
	path string
	out  *layout

	// A strip holds running for reading while it writes; Commit, Abort and
	// AppendTable hold it alone.
	running sync.RWMutex
	closed  bool
	images  []*cubeImage
	failed  atomic.Pointer[error] // the first failed write: the file is not whole
}

// cubeImage is an image of a Cube with the record of what was written.
type cubeImage struct {
	name            string
	hdu             *pending
	kind            sampleType
	columns, height int // NAXIS1 and NAXIS2
	planes          int

	mu      sync.Mutex
	written rowSet
}

// CreateCube lays out a file of a primary HDU and images and reserves its
// room. If primary is nil and the first image has no name, that image is the
// primary array; otherwise the primary HDU has no pixels. Errors as for
// WriteFile.
//
// Call Commit in the end, or Abort; Abort after Commit does nothing, so it may
// be deferred.
func CreateCube(path string, primary *Header, images []ImageSpec) (*Cube, error) {
	names := make([]string, len(images))
	for i := range images {
		names[i] = images[i].Name
	}
	if err := checkNames(path, names); err != nil {
		return nil, err
	}
	out, err := createLayout(path)
	if err != nil {
		return nil, err
	}
	c := &Cube{path: path, out: out}
	if err := c.layOut(primary, images, true); err != nil {
		out.part.abort()
		return nil, inFile(path, err)
	}
	return c, nil
}

// layOut gives the HDUs their places, and the file its room if that is to be reserved.
func (c *Cube) layOut(primary *Header, images []ImageSpec, reserve bool) error {
	if primary != nil || len(images) == 0 || images[0].Name != "" {
		if err := addEmptyPrimary(c.out, primary); err != nil {
			return err
		}
	}
	for i := range images {
		image, err := c.addImage(&images[i])
		if err != nil {
			return err
		}
		c.images = append(c.images, image)
	}
	if !reserve {
		return nil
	}
	return c.out.part.wrap(c.out.reserve(0), "cannot be written")
}

func (c *Cube) addImage(spec *ImageSpec) (*cubeImage, error) {
	kind := sampleType{bitpix: spec.BITPIX, unsigned: spec.Unsigned}
	switch spec.BITPIX {
	case 8, 16, 32, 64, -32, -64:
	default:
		return nil, writeFault(ErrStructure, spec.Name, fmt.Sprintf("its BITPIX is %d", spec.BITPIX), "use 8, 16, 32, 64, -32 or -64")
	}
	if spec.Unsigned && spec.BITPIX != 16 {
		return nil, writeFault(ErrStructure, spec.Name, "only 16-bit samples can be unsigned", "")
	}
	if len(spec.Axes) == 0 {
		return nil, writeFault(ErrStructure, spec.Name, "it has no axes", "")
	}
	primary := len(c.out.hdus) == 0
	shape := imageShape{name: spec.Name, bitpix: spec.BITPIX, unsigned: spec.Unsigned, axes: spec.Axes, primary: primary}
	header, samples, err := imageHeader(shape, spec.Header)
	if err != nil {
		return nil, err
	}
	hdu, err := c.out.add(header, samples*int64(kind.size()))
	if err != nil {
		return nil, err
	}
	columns, height := spec.Axes[0], 1
	if len(spec.Axes) > 1 {
		height = spec.Axes[1]
	}
	image := &cubeImage{name: spec.Name, hdu: hdu, kind: kind, columns: columns, height: height}
	image.planes = int(samples / int64(columns) / int64(height))
	image.written = newRowSet(image.planes, height)
	return image, nil
}

// WriteStrip writes the rows y0 to y0+h-1 of the planes l0 to l0+nl-1 of image
// number hdu (0 = the first of the images given to CreateCube). All count from
// 0; planes count over all axes beyond the second.
//
// data holds nl * h * NAXIS1 samples as [l][y][x], in a slice of the image's
// type ([]float32 for BITPIX -32, []int16 for 16, []uint16 for 16 unsigned,
// ...); it is not kept. Every row is to be written exactly once; a second time
// is an error (ErrRange). A call allocates nothing in steady state. After a
// failed write the cube can only be aborted.
func (c *Cube) WriteStrip(hdu, y0, h, l0, nl int, data any) error {
	c.running.RLock()
	defer c.running.RUnlock()
	if c.closed {
		return closedError(c.path)
	}
	if hdu < 0 || hdu >= len(c.images) {
		return fileError(c.path, ErrRange, fmt.Sprintf("image %d of %d is to be written", hdu, len(c.images)), "")
	}
	image := c.images[hdu]
	kind, count, ok := sampleTypeOf(data)
	if !ok || kind != image.kind {
		return c.fault(image, ErrType, "the data of a strip are of another type than the image", "")
	}
	if y0 < 0 || h < 1 || h > image.height-y0 || l0 < 0 || nl < 1 || nl > image.planes-l0 {
		return c.fault(image, ErrRange, fmt.Sprintf("a strip of rows %d to %d, planes %d to %d lies outside %d rows, %d planes",
			y0, y0+h-1, l0, l0+nl-1, image.height, image.planes), "")
	}
	if int64(count) != int64(nl)*int64(h)*int64(image.columns) {
		return c.fault(image, ErrRange, fmt.Sprintf("a strip of %d planes, %d rows, %d columns has %d samples", nl, h, image.columns, count), "")
	}
	image.mu.Lock()
	fresh := image.written.add(l0, nl, y0, h)
	image.mu.Unlock()
	if !fresh {
		err := c.fault(image, ErrRange, fmt.Sprintf("some of the rows %d to %d, planes %d to %d were written before", y0, y0+h-1, l0, l0+nl-1), "write every row once")
		return c.fail(err)
	}
	if err := c.writeRuns(image, y0, h, l0, nl, data); err != nil {
		return c.fail(writeError(c.path, err, "cannot be written"))
	}
	return nil
}

// writeRuns writes the samples of a checked strip, a run a plane; planes that
// are whole make one run.
func (c *Cube) writeRuns(image *cubeImage, y0, h, l0, nl int, data any) error {
	run, runs := h*image.columns, nl
	if h == image.height {
		run, runs = run*nl, 1
	}
	for i := range runs {
		row := int64(l0+i)*int64(image.height) + int64(y0)
		if err := c.out.writeSamples(image.hdu, image.kind, row*int64(image.columns), data, i*run, run); err != nil {
			return err
		}
	}
	return nil
}

// BeginSync asks the system to begin bringing to the disk what was written, so that Commit
// finds less to wait for. It may wait itself where the disk is slower than the writer.
func (c *Cube) BeginSync() {
	c.running.RLock()
	defer c.running.RUnlock()
	if c.closed {
		return
	}
	_ = c.out.part.traffic.writing(0, func() error { beginWriteback(c.out.part.file); return nil })
}

// Revise gives a card of image number hdu another value, before Commit. The card must be
// there and, as after, take one line (ErrRange otherwise, and nothing changes).
func (c *Cube) Revise(hdu int, key string, value any) error {
	c.running.Lock()
	defer c.running.Unlock()
	if c.closed {
		return closedError(c.path)
	}
	if hdu < 0 || hdu >= len(c.images) {
		return fileError(c.path, ErrRange, fmt.Sprintf("image %d of %d is to be revised", hdu, len(c.images)), "")
	}
	image := c.images[hdu]
	h := image.hdu.header
	at, found := h.index[foldKey(key)]
	if !found || structural(foldKey(key)) || len(h.entries[at].raw) != cardSize {
		return c.fault(image, ErrRange, fmt.Sprintf("card %s cannot be revised", key), "")
	}
	e, err := h.newEntry(Card{Key: h.entries[at].card.Key, Value: value, Comment: h.entries[at].card.Comment})
	if err != nil {
		return inFile(c.path, err)
	}
	if len(e.raw) != cardSize {
		return c.fault(image, ErrRange, fmt.Sprintf("card %s would take more than a line", key), "")
	}
	h.entries[at] = e
	return nil
}

// AppendTable adds a table behind the images and the tables appended before.
// Errors as for WriteFile.
func (c *Cube) AppendTable(t *Table) error {
	c.running.Lock()
	defer c.running.Unlock()
	if c.closed {
		return closedError(c.path)
	}
	if err := c.appendTable(t); err != nil {
		return c.fail(inFile(c.path, c.out.part.wrap(err, "cannot be written")))
	}
	return nil
}

func (c *Cube) appendTable(t *Table) error {
	names := []string{t.Name}
	for _, hdu := range c.out.hdus {
		name, err := hdu.header.Str("EXTNAME")
		if err == nil {
			names = append(names, name)
		}
	}
	if err := checkNames(c.path, names); err != nil {
		return err
	}
	from := c.out.end
	write, err := addTable(c.out, t)
	if err != nil {
		return err
	}
	if err := c.out.reserve(from); err != nil {
		return err
	}
	return write()
}

// Commit finishes the file: every row of every image must have been written
// (ErrRange otherwise) without a failure. It writes the headers with their
// sums, syncs the file and renames it. On an error the file is removed and the
// target is what it was before.
func (c *Cube) Commit() error {
	c.running.Lock()
	defer c.running.Unlock()
	if c.closed {
		return closedError(c.path)
	}
	c.closed = true
	defer c.out.part.abort()
	if first := c.failed.Load(); first != nil {
		return *first
	}
	for _, image := range c.images {
		if plane, row, missing := image.written.firstMissing(); missing {
			return c.fault(image, ErrRange, fmt.Sprintf("row %d of plane %d was never written", row, plane), "")
		}
	}
	return c.out.part.wrap(c.out.finish(), "cannot be written")
}

// Abort removes the file under construction. After Commit or another Abort it
// does nothing.
func (c *Cube) Abort() error {
	c.running.Lock()
	defer c.running.Unlock()
	if c.closed {
		return nil
	}
	c.closed = true
	return c.out.part.abort()
}

// fail records the first failure and returns err.
func (c *Cube) fail(err error) error {
	c.failed.CompareAndSwap(nil, &err)
	return err
}

func (c *Cube) fault(image *cubeImage, sentinel error, what, cure string) error {
	return inFile(c.path, writeFault(sentinel, image.name, what, cure))
}
