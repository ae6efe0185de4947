package reduce

import (
	"errors"
	"fmt"

	"golang.org/x/sys/unix"

	"mirrorloom/fitsutil"
)

// frame is an open frame of the night.
type frame struct {
	name  string
	step  int // index into the sequence's steps
	entry int // index into the ledger
	file  *fitsutil.File
	image *fitsutil.Image
	// saturated counts the saturated active pixels seen so far. One goroutine
	// at a time reads a frame.
	saturated int
}

// album holds the frames of a reduction. Where there are more of them than the
// process may hold open, each is closed after every strip.
type album struct {
	frames  []*frame
	release bool
}

// spareDescriptors are left for the products, the log and the libraries.
const spareDescriptors = 64

// openAlbum opens the frames named by at, which gives path, HDU, step and
// ledger entry.
func openAlbum(sources []source, scratchDir string) (_ *album, err error) {
	a := &album{release: len(sources)+spareDescriptors > descriptorLimit()}
	defer func() {
		if err != nil {
			err = errors.Join(err, a.close())
		}
	}()
	for _, s := range sources {
		file, err := fitsutil.OpenScratch(s.path, scratchDir)
		if err != nil {
			return nil, err
		}
		f := &frame{name: s.name, step: s.step, entry: s.entry, file: file}
		a.frames = append(a.frames, f)
		if f.image, err = file.Image(s.hdu); err != nil {
			return nil, err
		}
		if a.release {
			if err := file.Release(); err != nil {
				return nil, fmt.Errorf("close %s: %w", s.path, err)
			}
		}
	}
	return a, nil
}

// source names a frame to open.
type source struct {
	path, name       string
	hdu, step, entry int
}

// done gives back a frame's descriptor after a strip, if they are scarce.
func (a *album) done(f *frame) error {
	if !a.release {
		return nil
	}
	return f.file.Release()
}

func (a *album) close() error {
	var err error
	for _, f := range a.frames {
		err = errors.Join(err, f.file.Close())
	}
	return err
}

// descriptorLimit is how many files the process may hold open.
func descriptorLimit() int {
	var limit unix.Rlimit
	if err := unix.Getrlimit(unix.RLIMIT_NOFILE, &limit); err != nil {
		return 256 // the least that POSIX systems in use allow by default
	}
	return int(min(limit.Cur, 1<<20))
}
