package kept

import (
	"bufio"
	"bytes"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"os"

	"mirrorloom/fitsutil"
)

// magic begins a state; its last digit is the format of the files of this package.
const magic = "MLKEPT01"

// Digest is the SHA-256 of a state's bytes, by which a journal knows its state.
type Digest [sha256.Size]byte

// WriteState writes values, one after the other, into a file that appears whole or not at
// all. Errors as fitsutil.WriteAtomic.
func WriteState(path string, values ...any) (Digest, error) {
	sum := sha256.New()
	err := fitsutil.WriteAtomic(path, func(w io.Writer) error {
		sum.Reset()
		both := io.MultiWriter(w, sum)
		if _, err := io.WriteString(both, magic); err != nil {
			return err
		}
		for _, v := range values {
			if err := Encode(both, v); err != nil {
				return err
			}
		}
		_, err := w.Write(sum.Sum(nil))
		return err
	})
	return Digest(sum.Sum(nil)), err
}

// State is a state that is being read: its bytes are those that were written.
type State struct {
	*Decoder
	Digest Digest
	file   *os.File
}

// OpenState checks a state from end to end. The error (fs.ErrNotExist, ErrUnfit) names the
// file. Close it in the end.
func OpenState(path string) (*State, error) {
	file, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	s, err := newState(file)
	if err != nil {
		return nil, errors.Join(fmt.Errorf("%s: %w", path, err), file.Close())
	}
	return s, nil
}

// newState digests the file and goes back to its first value.
func newState(file *os.File) (*State, error) {
	info, err := file.Stat()
	if err != nil {
		return nil, err
	}
	size := info.Size() - sha256.Size
	if size < int64(len(magic)) {
		return nil, fmt.Errorf("%w (too short)", ErrUnfit)
	}
	sum, s := sha256.New(), &State{file: file}
	if _, err := io.Copy(sum, io.NewSectionReader(file, 0, size)); err != nil {
		return nil, err
	}
	sum.Sum(s.Digest[:0])
	var trailer Digest
	if _, err := file.ReadAt(trailer[:], size); err != nil {
		return nil, err
	}
	if s.Digest != trailer {
		return nil, fmt.Errorf("%w (its bytes were changed)", ErrUnfit)
	}
	r := bufio.NewReaderSize(io.NewSectionReader(file, 0, size), 1<<16)
	start := make([]byte, len(magic))
	if _, err := io.ReadFull(r, start); err != nil {
		return nil, err
	}
	if !bytes.Equal(start, []byte(magic)) {
		return nil, fmt.Errorf("%w (another format)", ErrUnfit)
	}
	s.Decoder = NewDecoder(r, size-int64(len(magic)))
	return s, nil
}

// Close gives back the file, which was only read from.
func (s *State) Close() { s.file.Close() }
