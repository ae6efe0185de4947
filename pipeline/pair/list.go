package pair

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"syscall"
)

// suffixes of the files that are frames.
var suffixes = [...]string{".fits", ".fits.gz"}

const otherCompression = ".fits.fz"

// List gives the names of the frames in a folder, sorted. The error is an *Error.
func List(dir string) ([]string, error) {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return nil, folderError(dir, err)
	}
	var names []string
	compressed := 0
	for _, e := range entries {
		name := e.Name()
		switch {
		case strings.HasPrefix(name, ".") || isFolder(dir, e):
		case strings.HasSuffix(name, otherCompression):
			compressed++
		case isFrame(name):
			names = append(names, name)
		}
	}
	if len(names) > 0 {
		return names, nil
	}
	if compressed > 0 {
		return nil, &Error{File: dir, What: fmt.Sprintf("its %d frames are tile-compressed (*%s), which is not read yet", compressed, otherCompression),
			Cure: "unpack them with funpack"}
	}
	return nil, &Error{File: dir, What: "the night is empty: it holds no file *.fits or *.fits.gz",
		Cure: "give the folder with the frames themselves (subfolders are not read)"}
}

func isFrame(name string) bool {
	for _, s := range suffixes {
		if strings.HasSuffix(name, s) {
			return true
		}
	}
	return false
}

// isFolder follows symbolic links: frames may be links, and so may subfolders.
func isFolder(dir string, e fs.DirEntry) bool {
	if e.Type()&fs.ModeSymlink == 0 {
		return e.IsDir()
	}
	info, err := os.Stat(filepath.Join(dir, e.Name()))
	return err == nil && info.IsDir()
}

func folderError(dir string, err error) error {
	e := &Error{File: dir, What: "the night cannot be read: " + reason(err), Cure: "check the folder and its disk", Err: err}
	switch {
	case errors.Is(err, fs.ErrNotExist):
		e.What, e.Cure = "there is no such folder", "give the folder with the night's frames"
	case errors.Is(err, syscall.ENOTDIR):
		e.What, e.Cure = "this is a file, not a folder", "give the folder with the night's frames"
	case errors.Is(err, fs.ErrPermission):
		e.What, e.Cure = "the night may not be read", "give yourself the right to read the folder (chmod +rx)"
	}
	return e
}

// reason is the bare text of a system's error, without the path.
func reason(err error) string {
	var at *fs.PathError
	if errors.As(err, &at) {
		return at.Err.Error()
	}
	return err.Error()
}
