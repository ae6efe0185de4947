package fitsutil

import (
	"bufio"
	"compress/flate"
	"compress/gzip"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"os"
	"syscall"
)

// unpacker unpacks gzip files into a folder.
type unpacker struct {
	dir string // "" = the system's folder for temporary files
	// free tells the bytes that may still be written in a folder, and whether this is known.
	free func(dir string) (int64, bool)
}

// isGzip tells whether the file starts with the magic bytes of RFC 1952.
func isGzip(f *File) (bool, error) {
	var magic [2]byte
	if f.size < 2 {
		return false, nil
	}
	err := f.readAt(magic[:], 0)
	return magic == [2]byte{0x1f, 0x8b}, err
}

// unpack closes the packed file and gives its unpacked copy. Errors unwrap to ErrNoRoom,
// ErrGzip (damage), ErrTruncated and ErrGzip (cut short), or the system's; the copy is gone then.
func (u unpacker) unpack(packed *File) (*File, error) {
	defer packed.Close() // only read from
	if u.dir == "" {
		u.dir = os.TempDir()
	}
	if err := u.checkRoom(packed); err != nil {
		return nil, err
	}
	copied, err := os.CreateTemp(u.dir, "fitsutil-*.fits")
	if err != nil {
		return nil, u.writeError(packed.path, err)
	}
	err = u.inflate(copied, packed)
	if closing := copied.Close(); err == nil && closing != nil {
		err = u.writeError(packed.path, closing)
	}
	disk := &diskFile{path: packed.path, name: copied.Name()}
	var fd source
	if err == nil {
		fd, err = disk.open()
	}
	if err != nil {
		os.Remove(copied.Name()) // the first error is the news
		return nil, err
	}
	return &File{path: packed.path, size: disk.info.Size(), open: disk.open, fd: fd, scratch: copied.Name()}, nil
}

// checkRoom compares the free room with the unpacked size. Gzip tells that size modulo 2^32
// only; since deflate cannot make data longer than by a few bytes in a block, the packed size
// gives a lower bound and the smallest size above it is taken.
func (u unpacker) checkRoom(packed *File) error {
	const trailer = 4 // ISIZE, RFC 1952 section 2.3.1
	free, known := u.free(u.dir)
	if !known || packed.size < trailer {
		return nil
	}
	var size [trailer]byte
	if err := packed.readAt(size[:], packed.size-trailer); err != nil {
		return err
	}
	need := int64(binary.LittleEndian.Uint32(size[:]))
	for need < packed.size-packed.size/100-1024 {
		need += 1 << 32
	}
	if need <= free {
		return nil
	}
	return u.noRoom(packed.path, ErrNoRoom, fmt.Sprintf("it unpacks to %d bytes and %s has room for %d", need, u.dir, free))
}

func (u unpacker) noRoom(path string, err error, what string) error {
	return fileError(path, err, what, "make room there, or name another folder for scratch files")
}

// inflate unpacks the file.
func (u unpacker) inflate(into io.Writer, packed *File) error {
	fail := func(err error) error { return packError(packed.path, err) }
	reader, err := gzip.NewReader(bufio.NewReaderSize(io.NewSectionReader(fileReader{packed}, 0, packed.size), chunkBytes))
	if err != nil {
		return fail(err)
	}
	buffer := getBuffer()
	defer putBuffer(buffer)
	for {
		n, err := reader.Read(*buffer)
		if n > 0 {
			if _, failed := into.Write((*buffer)[:n]); failed != nil {
				return u.writeError(packed.path, failed)
			}
		}
		switch {
		case err == io.EOF:
			return nil
		case err != nil:
			return fail(err)
		}
	}
}

// packError says what is wrong with a packed file.
func packError(path string, err error) error {
	const cure = "copy the file again from its source"
	var place flate.CorruptInputError
	switch {
	case errors.Is(err, io.ErrUnexpectedEOF), errors.Is(err, io.EOF):
		return fileError(path, errors.Join(ErrTruncated, ErrGzip), "the gzip stream is cut short", cure)
	case errors.Is(err, gzip.ErrChecksum):
		return fileError(path, ErrGzip, "the gzip stream is damaged: its checksum or length is wrong", cure)
	case errors.As(err, &place):
		e := fileError(path, ErrGzip, "the gzip stream is damaged near this byte of the packed file", cure)
		e.Offset = int64(place)
		return e
	case errors.Is(err, gzip.ErrHeader):
		return fileError(path, ErrGzip, "a gzip header is damaged, or other bytes follow the packed data", cure)
	}
	return err // of reading the packed file, which is named already
}

// writeError says why the unpacked copy could not be written.
func (u unpacker) writeError(path string, err error) error {
	if errors.Is(err, syscall.ENOSPC) || errors.Is(err, syscall.EDQUOT) {
		return u.noRoom(path, errors.Join(ErrNoRoom, err), fmt.Sprintf("%s has no room to unpack it", u.dir))
	}
	return systemError(path, nil, err, fmt.Sprintf("it cannot be unpacked into %s: %s", u.dir, reason(err)),
		"name a folder for scratch files that can be written")
}

// fileReader is a File as an io.ReaderAt for whole reads.
type fileReader struct{ f *File }

func (r fileReader) ReadAt(p []byte, offset int64) (int, error) {
	n := min(int64(len(p)), r.f.size-offset)
	if n <= 0 {
		return 0, io.EOF
	}
	if err := r.f.readAt(p[:n], offset); err != nil {
		return 0, err
	}
	if n < int64(len(p)) {
		return int(n), io.EOF
	}
	return int(n), nil
}
