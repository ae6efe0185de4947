package sequence

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
)

// Read reads the sequence in the folder dir and checks everything that can be
// checked: the code against its family, the mask of every step against its code
// bits and against its PNG, the digests of profile and target, and what the
// tables say among themselves. An error names the file at fault, what is wrong
// and the cure: an *Error, a *fitsutil.Error or a *config.Error.
func Read(ctx context.Context, dir string) (*Sequence, error) {
	s := new(Sequence)
	if err := s.read(ctx, dir); err != nil {
		return nil, err
	}
	return s, nil
}

func (s *Sequence) read(ctx context.Context, dir string) error {
	path := filepath.Join(dir, fitsFile)
	before, err := fileDigest(path)
	if errors.Is(err, fs.ErrNotExist) {
		return &Error{File: dir, What: "it is no sequence: it holds no " + fitsFile, Cure: "give the folder that mirrorloom plan wrote", Err: err}
	}
	if err != nil {
		return err
	}
	s.SHA = before
	if err := s.readFITS(path); err != nil {
		return inFile(path, err)
	}
	if err := s.readTexts(dir); err != nil {
		return err
	}
	if err := s.check(); err != nil {
		return inFile(path, err)
	}
	if err := s.readMasks(ctx, dir); err != nil {
		return err
	}
	return s.refuseStrangers(dir)
}

func fileDigest(path string) (string, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return "", err
	}
	return digest(data), nil
}

// inFile names the file in a fault that does not, and the cure in an error of
// the FITS file that has none.
func inFile(path string, err error) error {
	var own *Error
	if errors.As(err, &own) {
		if own.File == "" {
			own.File = path
		}
		return err
	}
	var f *fitsutil.Error
	if errors.As(err, &f) && f.Cure == "" {
		return &Error{What: err.Error(), Cure: planAgain, Err: err}
	}
	return err
}

// maxTextBytes is above what package config takes; larger files are not read.
const maxTextBytes = 8 << 20

func readText(dir, name string) ([]byte, error) {
	path := filepath.Join(dir, name)
	f, err := os.Open(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, &Error{File: path, What: "the file is missing", Cure: planAgain, Err: err}
	}
	if err != nil {
		return nil, err
	}
	data, err := io.ReadAll(io.LimitReader(f, maxTextBytes+1))
	if err := errors.Join(err, f.Close()); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if len(data) > maxTextBytes {
		return nil, &Error{File: path, What: fmt.Sprintf("the file is larger than %d bytes", maxTextBytes), Cure: planAgain}
	}
	return data, nil
}

// readTexts reads profile.yaml and target.yaml and compares their digests.
func (s *Sequence) readTexts(dir string) error {
	text, err := readText(dir, profileFile)
	if err != nil {
		return err
	}
	path := filepath.Join(dir, profileFile)
	beside := func(name string) ([]byte, error) { return readText(dir, name) }
	s.Profile, err = instrument.Parse(path, text, beside)
	if err != nil {
		return err
	}
	resolved, err := s.Profile.YAML()
	if err != nil {
		return err
	}
	if s.Profile.SHA() != s.ProfileSHA || !bytes.Equal(resolved, text) {
		return &Error{File: path, What: "the profile is not the one the sequence was planned with (PROFSHA of " + fitsFile + ")", Cure: planAgain}
	}
	if s.ProfileName != s.Profile.Name {
		return &Error{File: path, What: fmt.Sprintf("the name is %q where %s has PROFNAME %q", s.Profile.Name, fitsFile, s.ProfileName), Cure: planAgain}
	}
	if text, err = readText(dir, targetFile); err != nil {
		return err
	}
	path = filepath.Join(dir, targetFile)
	if s.Target, err = ParseTargetBeside(path, text, beside); err != nil {
		return err
	}
	if digest(text) != s.TargetSHA {
		return &Error{File: path, What: "the target is not the one the sequence was planned with (TARGSHA of " + fitsFile + ")", Cure: planAgain}
	}
	return nil
}

// readMasks compares the mirrors of every step with its MASKID and its PNG.
func (s *Sequence) readMasks(ctx context.Context, dir string) error {
	return s.forEachGroup(ctx, runtime.GOMAXPROCS(0), func(g *group, m *Mask) error {
		id := m.ID()
		for _, i := range g.steps {
			if st := s.Steps[i]; st.MaskID != id {
				f := fault("step %d has MASKID %q where CODE, expanded by ELEMENTS and ROWS, gives %s", st.Step, st.MaskID, id)
				f.File = filepath.Join(dir, fitsFile)
				return f
			}
		}
		return comparePNG(filepath.Join(dir, maskFolder, id+maskSuffix), m)
	})
}

func comparePNG(path string, m *Mask) error {
	data, err := readText(filepath.Dir(path), filepath.Base(path))
	if err != nil {
		return err
	}
	shown, err := DecodePNG(data, m.Columns, m.Rows)
	if err != nil {
		return &Error{File: path, What: err.Error(), Cure: planAgain, Err: err}
	}
	if !bytes.Equal(shown.On, m.On) {
		return &Error{File: path, What: "its mirrors have the digest " + shown.ID() + ", not the one of its name", Cure: planAgain}
	}
	return nil
}

// refuseStrangers refuses masks that belong to no step: somebody would load
// them into the device.
func (s *Sequence) refuseStrangers(dir string) error {
	known := map[string]bool{}
	for _, st := range s.Steps {
		known[st.MaskID+maskSuffix] = true
	}
	folder := filepath.Join(dir, maskFolder)
	entries, err := os.ReadDir(folder)
	if err != nil {
		return err
	}
	for _, e := range entries {
		if name := e.Name(); strings.HasSuffix(name, maskSuffix) && !known[name] {
			return &Error{File: filepath.Join(folder, name), What: "no step shows this mask", Cure: "remove the file"}
		}
	}
	return nil
}
