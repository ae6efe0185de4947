package fitsutil

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"strings"
	"sync"
	"syscall"
)

// source is what a File reads from.
type source interface {
	io.ReaderAt
	io.Closer
}

// File is an open FITS file: its headers in memory, its data on disk. Safe for concurrent use.
type File struct {
	path string // as the caller named it, for errors
	size int64
	hdus []*HDU
	// open opens what is read, the file itself or its unpacked copy, again after Release.
	open    func() (source, error)
	scratch string // unpacked copy to remove at Close, or empty
	traffic *Traffic

	mu     sync.RWMutex // held for reading while fd is in use
	fd     source       // nil while released
	closed bool
}

// Open opens a FITS file, or one packed by gzip, and reads the headers of all its HDUs. A
// packed file is known by its first bytes, whatever its name, and is unpacked once into the
// system's folder for temporary files: see OpenScratch.
//
// Errors are *Error and unwrap to the sentinels of this package or to those of io/fs.
func Open(path string) (*File, error) { return OpenScratch(path, "") }

// OpenScratch is Open with the folder that a packed file is unpacked into ("" = the system's
// folder for temporary files). The unpacked copy is removed by Close; before it is written the
// disk is asked for room, as far as the size can be known beforehand.
func OpenScratch(path, scratchDir string) (*File, error) {
	return unpacker{dir: scratchDir, free: freeBytes}.openFile(path)
}

// openFile opens a path, unpacking it first where needed.
func (u unpacker) openFile(path string) (*File, error) {
	disk := &diskFile{path: path, name: path}
	fd, err := disk.open()
	if err != nil {
		return nil, err
	}
	f := &File{path: path, size: disk.info.Size(), open: disk.open, fd: fd}
	if packed, err := isGzip(f); err != nil {
		f.Close() // only read from
		return nil, err
	} else if packed {
		if f, err = u.unpack(f); err != nil {
			return nil, err
		}
	}
	if err := f.scan(); err != nil {
		f.Close() // nothing was written; what is wrong with the file is the news
		return nil, err
	}
	return f, nil
}

// HDUs gives the HDUs in file order. The slice is not to be changed.
func (f *File) HDUs() []*HDU { return f.hdus }

// Path is the name under which the file was opened.
func (f *File) Path() string { return f.path }

// Release closes the descriptor and keeps the headers; the next read opens the file again, and
// fails with ErrChanged if it is no longer the same. With it thousands of frames can be held
// open while the process may have only a few hundred descriptors.
func (f *File) Release() error {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.drop()
}

// Close ends the use of the file and removes its unpacked copy. Closing twice is allowed;
// reading afterwards fails with ErrClosed.
func (f *File) Close() error {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.closed = true
	err := f.drop()
	if f.scratch != "" {
		if gone := os.Remove(f.scratch); gone != nil && !errors.Is(gone, fs.ErrNotExist) {
			err = errors.Join(err, systemError(f.scratch, nil, gone, "the unpacked copy cannot be removed: "+reason(gone),
				"remove it by hand"))
		}
		f.scratch = ""
	}
	return err
}

// drop closes the descriptor; the lock is held.
func (f *File) drop() error {
	if f.fd == nil {
		return nil
	}
	fd := f.fd
	f.fd = nil
	if err := fd.Close(); err != nil {
		return systemError(f.path, nil, err, "closing failed: "+reason(err), "")
	}
	return nil
}

// readAt fills p from an offset. All of p must lie within the file.
func (f *File) readAt(p []byte, offset int64) error {
	fd, err := f.acquire()
	if err != nil {
		return err
	}
	defer f.mu.RUnlock()
	var n int
	err = f.traffic.reading(len(p), func() (err error) {
		n, err = fd.ReadAt(p, offset)
		return err
	})
	if n == len(p) {
		return nil
	}
	if errors.Is(err, io.EOF) {
		return &Error{File: f.path, HDU: none, Offset: offset + int64(n),
			What: "the file has become shorter since it was opened",
			Cure: "let no other program write into it", Err: errors.Join(ErrTruncated, ErrChanged)}
	}
	e := systemError(f.path, nil, err, "reading failed: "+reason(err), "check the disk")
	e.Offset = offset
	return e
}

// acquire gives the descriptor with the lock held for reading.
func (f *File) acquire() (source, error) {
	for {
		f.mu.RLock()
		if f.fd != nil {
			return f.fd, nil
		}
		f.mu.RUnlock()
		if err := f.reopen(); err != nil {
			return nil, err
		}
	}
}

func (f *File) reopen() error {
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.closed {
		return fileError(f.path, ErrClosed, "the file was closed before this read", "")
	}
	if f.fd != nil {
		return nil
	}
	fd, err := f.open()
	if err != nil {
		return err
	}
	f.fd = fd
	return nil
}

// diskFile opens one file, the same each time.
type diskFile struct {
	path string      // named in errors
	name string      // opened
	info os.FileInfo // as it was first; nil before
}

func (d *diskFile) open() (source, error) {
	// Asked before opening: to open a pipe would wait for its writer.
	info, err := os.Stat(d.name)
	if err != nil {
		return nil, openError(d.path, err)
	}
	switch {
	case info.IsDir():
		return nil, fileError(d.path, ErrNotFITS, "this is a folder, not a file", "give a FITS file")
	case !info.Mode().IsRegular():
		return nil, fileError(d.path, ErrNotFITS, "this is no regular file", "give a FITS file")
	}
	fd, err := os.Open(d.name)
	if err != nil {
		return nil, openError(d.path, err)
	}
	if info, err = fd.Stat(); err != nil {
		fd.Close() // only read from
		return nil, openError(d.path, err)
	}
	if d.info == nil {
		d.info = info
	}
	if !os.SameFile(d.info, info) || d.info.Size() != info.Size() || !d.info.ModTime().Equal(info.ModTime()) {
		fd.Close() // only read from
		return nil, fileError(d.path, ErrChanged, "the file has been changed since it was opened",
			"let no other program write into it, and start again")
	}
	return fd, nil
}

// openError says why a file cannot be opened.
func openError(path string, err error) error {
	cure := "check the path"
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return systemError(path, nil, err, "there is no such file", cure)
	case errors.Is(err, fs.ErrPermission):
		cure = "give yourself the right to read it (chmod +r)"
	case errors.Is(err, syscall.EMFILE), errors.Is(err, syscall.ENFILE):
		cure = "allow more open files (ulimit -n)"
	}
	return systemError(path, nil, err, fmt.Sprintf("the file cannot be opened: %s", reason(err)), cure)
}

// reason is the bare text of a system's error, without the path that the *Error names itself.
func reason(err error) string {
	var number syscall.Errno
	if errors.As(err, &number) {
		return number.Error()
	}
	return strings.TrimSpace(err.Error())
}
