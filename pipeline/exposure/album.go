package exposure

import (
	"errors"
	"fmt"

	"golang.org/x/sys/unix"

	"mirrorloom/fitsutil"
)

// Frame is an open frame of the night.
type Frame struct {
	Name  string
	Step  int // index into the sequence's steps
	Entry int // index into the ledger
	Image *fitsutil.Image
	// Saturated counts the saturated active pixels seen so far. One goroutine
	// at a time reads a frame.
	Saturated int
	file      *fitsutil.File
}

// Album holds open frames. Where there are more of them than the process may
// hold open, each is closed after every use.
type Album struct {
	Frames  []*Frame
	release bool
}

// spareDescriptors are left for the products, the log and the libraries.
const spareDescriptors = 64

// OpenAlbum opens frames; packed ones are unpacked into scratchDir. Errors name
// the file.
func OpenAlbum(sources []Source, scratchDir string) (_ *Album, err error) {
	a := &Album{release: len(sources)+spareDescriptors > descriptorLimit()}
	defer func() {
		if err != nil {
			err = errors.Join(err, a.Close())
		}
	}()
	for _, s := range sources {
		file, err := fitsutil.OpenScratch(s.Path, scratchDir)
		if err != nil {
			return nil, err
		}
		f := &Frame{Name: s.Name, Step: s.Step, Entry: s.Entry, file: file}
		a.Frames = append(a.Frames, f)
		if f.Image, err = file.Image(s.HDU); err != nil {
			return nil, err
		}
		if a.release {
			if err := file.Release(); err != nil {
				return nil, fmt.Errorf("close %s: %w", s.Path, err)
			}
		}
	}
	return a, nil
}

// Source names a frame to open: path, name in messages, HDU, index into the
// sequence's steps and into the ledger.
type Source struct {
	Path, Name       string
	HDU, Step, Entry int
}

// Done gives back a frame's descriptor after a use, if they are scarce.
func (a *Album) Done(f *Frame) error {
	if !a.release {
		return nil
	}
	return f.file.Release()
}

// CountInto has what is read of the frames add to t.
func (a *Album) CountInto(t *fitsutil.Traffic) {
	for _, f := range a.Frames {
		f.file.CountInto(t)
	}
}

// Close closes all frames.
func (a *Album) Close() error {
	var err error
	for _, f := range a.Frames {
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
