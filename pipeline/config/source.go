package config

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"mirrorloom/configs"
)

// Source is the text of a configuration and the place it came from.
type Source struct {
	// Name is what errors call it: the path as given, or "configs/FOLDER/NAME.yaml"
	// for an embedded one.
	Name string
	// Data is the text.
	Data []byte

	folder string // of the embedded files; empty for a file on disk
	dir    string // of the file on disk
}

// Find reads a configuration by the name of an embedded one of the folder (see
// package configs) or, failing that, by path; "./optical" means the file where
// "optical" is an embedded name. The error of a name that is neither wraps
// fs.ErrNotExist and lists the embedded names.
func Find(folder, pathOrName string) (*Source, error) {
	if slices.Contains(configs.Names(folder), pathOrName) {
		data, err := configs.Read(folder, pathOrName)
		if err != nil {
			return nil, err
		}
		return &Source{Name: "configs/" + folder + "/" + pathOrName + ".yaml", Data: data, folder: folder}, nil
	}
	data, err := readBounded(pathOrName)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("%s: %w; give a file or one of the embedded %s: %s", pathOrName, fs.ErrNotExist, folder, strings.Join(configs.Names(folder), ", "))
	}
	if err != nil {
		return nil, err
	}
	return &Source{Name: pathOrName, Data: data, dir: filepath.Dir(pathOrName)}, nil
}

// Parse is Parse of the source's text.
func (s *Source) Parse() (*Doc, error) { return Parse(s.Name, s.Data) }

// Beside reads a file that the configuration names, from the configuration's
// own folder. name must be a bare file name: the file is copied beside the
// resolved configuration, so that two folders could not be kept apart.
func (s *Source) Beside(name string) ([]byte, error) {
	if !BareName(name) {
		return nil, fmt.Errorf("%q is no bare file name; put the file beside %s", name, s.Name)
	}
	if s.folder != "" {
		return configs.ReadFile(s.folder, name)
	}
	data, err := os.ReadFile(filepath.Join(s.dir, name))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("there is no file %s beside %s; put it there: %w", name, s.Name, fs.ErrNotExist)
	}
	return data, err
}

// BareName reports whether name is a file name without a folder, of letters,
// digits, dot, underscore and hyphen, not hidden: safe to copy anywhere.
func BareName(name string) bool {
	for i, r := range name {
		letter := r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || r == '_'
		if !letter && (i == 0 || r != '.' && r != '-') {
			return false
		}
	}
	return name != "" && len(name) <= 128
}

// readBounded reads a file of at most one byte more than a document may have,
// so that a wrong path to a night's frame does not fill the memory.
func readBounded(path string) ([]byte, error) {
	info, err := os.Stat(path)
	if err != nil {
		return nil, err
	}
	if info.IsDir() {
		return nil, fmt.Errorf("%s is a folder; give a YAML file", path)
	}
	if info.Size() > maxBytes {
		return nil, &Error{File: path, What: fmt.Sprintf("the file has %d bytes, more than a configuration may have (%d); give a smaller file", info.Size(), maxBytes)}
	}
	return os.ReadFile(path)
}
