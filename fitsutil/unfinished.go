package fitsutil

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
)

// A cube that takes long can outlive its process: Suspend leaves its unfinished file where it
// is, or the process is killed, and ReopenCube goes on with it, told by a record of
// Progress what was safely written before.

// ErrNotAsLeft marks an unfinished file that does not hold what was recorded of it.
var ErrNotAsLeft = errors.New("the unfinished file was changed")

// ImageProgress is what of an image of a cube was written: the first Rows rows of every
// plane, and the sum of their bytes as DATASUM counts them.
type ImageProgress struct {
	Rows int
	Sum  uint32
}

// Unfinished is the path of the file that will be renamed at Commit; empty once that was done.
func (c *Cube) Unfinished() string {
	c.running.RLock()
	defer c.running.RUnlock()
	if c.closed {
		return ""
	}
	return c.out.part.file.Name()
}

// Sums are those of the bytes written to each image so far.
func (c *Cube) Sums() []uint32 {
	sums := make([]uint32, len(c.images))
	for i, image := range c.images {
		image.hdu.mu.Lock()
		sums[i] = image.hdu.sum
		image.hdu.mu.Unlock()
	}
	return sums
}

// Flush brings what was written to the disk, while strips may be written.
func (c *Cube) Flush() error {
	c.running.RLock()
	defer c.running.RUnlock()
	if c.closed {
		return closedError(c.path)
	}
	if err := c.out.part.traffic.writing(0, func() error { return syncData(c.out.part.file) }); err != nil {
		return c.fail(c.out.part.wrap(err, "cannot be synced to the disk"))
	}
	return nil
}

// Suspend closes the cube and leaves its unfinished file. After Commit or Abort it does
// nothing.
func (c *Cube) Suspend() error {
	c.running.Lock()
	defer c.running.Unlock()
	if c.closed {
		return nil
	}
	c.closed = true
	err := c.out.part.file.Close()
	c.out.part.file = nil
	return err
}

// ReopenCube is CreateCube for a cube of which unfinished is the file, as Unfinished gave
// it, or path itself if it was committed: primary and images are those given to
// CreateCube, and done is what of each image was written. What is in the file beyond that
// is written anew. The rows that are done are read and their sums compared.
//
// Errors are ErrNotAsLeft for a file that is not there, too short or of other bytes, and as
// for CreateCube; the file is left as it was.
func ReopenCube(path, unfinished string, primary *Header, images []ImageSpec, done []ImageProgress) (*Cube, error) {
	part, err := reopenPart(path, unfinished)
	if err != nil {
		return nil, err
	}
	c := &Cube{path: path, out: &layout{part: part}}
	if err := c.takeUp(primary, images, done); err != nil {
		err = errors.Join(inFile(path, err), part.file.Close())
		part.file = nil
		return nil, err
	}
	return c, nil
}

// reopenPart opens an unfinished file, or makes the committed one unfinished again.
func reopenPart(path, unfinished string) (*partFile, error) {
	if filepath.Dir(unfinished) != filepath.Dir(path) || unfinished == path {
		return nil, fileError(path, ErrNotAsLeft, fmt.Sprintf("%s is no unfinished file of it", unfinished), "")
	}
	if _, err := os.Lstat(unfinished); errors.Is(err, fs.ErrNotExist) {
		// Nothing is in the way if neither is there: the opening says so.
		_ = os.Rename(path, unfinished)
	}
	file, err := os.OpenFile(unfinished, os.O_RDWR, 0)
	if err != nil {
		return nil, systemError(path, ErrNotAsLeft, err, "cannot be gone on with: "+rootCause(err).Error(), "")
	}
	return &partFile{path: path, file: file}, nil
}

func (c *Cube) takeUp(primary *Header, images []ImageSpec, done []ImageProgress) error {
	if err := c.layOut(primary, images, false); err != nil {
		return err
	}
	info, err := c.out.part.file.Stat()
	if err != nil {
		return err
	}
	if !info.Mode().IsRegular() || info.Size() < c.out.end || len(done) != len(c.images) {
		return fileError("", ErrNotAsLeft, "its unfinished file is not as it was left", "")
	}
	for i, image := range c.images {
		if err := c.check(image, done[i]); err != nil {
			return err
		}
	}
	// Tables are appended anew.
	if err := c.out.part.file.Truncate(c.out.end); err != nil {
		return c.out.part.wrap(err, "cannot be written")
	}
	return c.out.part.wrap(c.out.reserve(0), "cannot be written")
}

// check reads the rows that are done, and enters them.
func (c *Cube) check(image *cubeImage, done ImageProgress) error {
	if done.Rows < 0 || done.Rows > image.height {
		return writeFault(ErrNotAsLeft, image.name, fmt.Sprintf("%d of %d rows are to be done", done.Rows, image.height), "")
	}
	buffer := getBuffer()
	defer putBuffer(buffer)
	sum := uint32(0)
	run := int64(done.Rows) * int64(image.columns) * int64(image.kind.size())
	plane := int64(image.height) * int64(image.columns) * int64(image.kind.size())
	for l := range int64(image.planes) {
		for at := int64(0); at < run; {
			bytes := (*buffer)[:min(run-at, chunkBytes)]
			if _, err := c.out.part.file.ReadAt(bytes, image.hdu.dataAt+l*plane+at); err != nil {
				return c.out.part.wrap(err, "cannot be read")
			}
			sum = addSums(sum, sumRun(l*plane+at, bytes))
			at += int64(len(bytes))
		}
	}
	if !sameSum(sum, done.Sum) {
		return writeFault(ErrNotAsLeft, image.name, fmt.Sprintf("the first %d rows of its unfinished file are not as they were written", done.Rows), "")
	}
	image.hdu.sum = done.Sum
	if done.Rows > 0 {
		image.written.add(0, image.planes, 0, done.Rows)
	}
	return nil
}

// sameSum compares ones'-complement sums, which have two zeros.
func sameSum(a, b uint32) bool {
	return a == b || (a == 0 || a == 0xFFFFFFFF) && (b == 0 || b == 0xFFFFFFFF)
}
