package fitsutil

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"syscall"
)

// WriteAtomic writes a small file whole or not at all: write fills a temporary
// file beside path, which is synced and renamed to path, with the folder synced
// after it. Whatever fails, or if the process is killed, path keeps what it
// held; on an error the temporary file is removed as well.
//
// The error is what write returned when it is an *Error already, else an *Error
// that names path and, for a full disk (errors.Is ErrNoRoom), a folder that is
// missing or closed to the user and the like, the cure.
func WriteAtomic(path string, write func(io.Writer) error) error {
	part, err := createPart(path)
	if err != nil {
		return err
	}
	defer part.abort()
	buffer := bufio.NewWriterSize(part.file, 1<<16)
	if err := write(buffer); err != nil {
		return part.wrap(err, "cannot be written")
	}
	if err := buffer.Flush(); err != nil {
		return part.wrap(err, "cannot be written")
	}
	return part.commit()
}

// partFile is a file under construction beside its target.
type partFile struct {
	path    string   // the target
	file    *os.File // the temporary file; nil once committed or aborted
	traffic *Traffic
}

// createPart opens a new temporary file in the folder of path. Its name does
// not end as the target's does, so that nobody takes it for a product.
func createPart(path string) (*partFile, error) {
	if info, err := os.Stat(path); err == nil && info.IsDir() {
		return nil, fileError(path, syscall.EISDIR, "is a folder", "name a file to write")
	}
	folder, base := filepath.Split(path)
	for {
		name := fmt.Sprintf("%s.%s.%08x.part", folder, base, rand.Uint32())
		// Not os.CreateTemp: it makes files private, a product gets what
		// the umask allows.
		file, err := os.OpenFile(name, os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o666)
		if errors.Is(err, fs.ErrExist) {
			continue
		}
		if err != nil {
			return nil, writeError(path, err, "cannot be created")
		}
		return &partFile{path: path, file: file}, nil
	}
}

// commit syncs the file, gives it its name and syncs the folder. An error
// leaves the target as it was and nothing beside it, except when the very last
// step, the folder's sync, fails: then the file is whole but may not outlive a
// power cut.
func (p *partFile) commit() error {
	if err := p.traffic.writing(0, p.file.Sync); err != nil {
		return p.wrap(err, "cannot be synced to the disk")
	}
	temporary := p.file.Name()
	if err := p.file.Close(); err != nil {
		return p.wrap(err, "cannot be closed")
	}
	if err := os.Rename(temporary, p.path); err != nil {
		return p.wrap(err, "cannot be renamed to its name")
	}
	p.file = nil
	if err := syncFolder(filepath.Dir(p.path)); err != nil {
		return writeError(p.path, err, "is written, but its folder cannot be synced to the disk")
	}
	return nil
}

// abort removes the temporary file; after commit it does nothing.
func (p *partFile) abort() error {
	if p.file == nil {
		return nil
	}
	temporary := p.file.Name()
	p.file.Close() // fails harmlessly after a commit that closed it
	p.file = nil
	if err := os.Remove(temporary); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return writeError(temporary, err, "cannot be removed")
	}
	return nil
}

// wrap is writeError for the target; nil stays nil.
func (p *partFile) wrap(err error, what string) error {
	if err == nil {
		return nil
	}
	return writeError(p.path, err, what)
}

// syncFolder makes a rename in the folder durable.
func syncFolder(folder string) error {
	dir, err := os.Open(folder)
	if err != nil {
		return err
	}
	defer dir.Close()
	err = dir.Sync()
	if errors.Is(err, syscall.EINVAL) || errors.Is(err, syscall.ENOTSUP) {
		// Some file systems know no sync of a folder; there is no more to do.
		return nil
	}
	return err
}

// writeError wraps an error met while writing path, with the cure that its
// cause suggests. An *Error stays what it is.
func writeError(path string, err error, what string) error {
	var known *Error
	if errors.As(err, &known) {
		return err
	}
	what += ": " + rootCause(err).Error()
	switch {
	case errors.Is(err, syscall.ENOSPC):
		return systemError(path, ErrNoRoom, err, what, "make room on that disk or write to another one")
	case errors.Is(err, syscall.EDQUOT):
		return systemError(path, ErrNoRoom, err, what, "the quota is used up: make room or write elsewhere")
	case errors.Is(err, syscall.EFBIG):
		return systemError(path, nil, err, what, "the file system or a limit (ulimit -f) allows no file of that size: write elsewhere")
	case errors.Is(err, fs.ErrPermission), errors.Is(err, syscall.EROFS):
		return systemError(path, nil, err, what, "write to a folder that you may write to")
	case errors.Is(err, fs.ErrNotExist):
		return systemError(path, nil, err, what, "create the folder first")
	case errors.Is(err, syscall.ENOTDIR):
		return systemError(path, nil, err, what, "a part of the path is a file, not a folder: correct the path")
	case errors.Is(err, syscall.EMFILE):
		return systemError(path, nil, err, what, "too many files are open: raise ulimit -n")
	case errors.Is(err, syscall.ENAMETOOLONG):
		return systemError(path, nil, err, what, "choose a shorter name")
	}
	return systemError(path, nil, err, what, "")
}

// rootCause is the reason inside a path error, which would name the temporary
// file.
func rootCause(err error) error {
	var pathError *fs.PathError
	var linkError *os.LinkError
	switch {
	case errors.As(err, &pathError):
		return pathError.Err
	case errors.As(err, &linkError):
		return linkError.Err
	}
	return err
}
