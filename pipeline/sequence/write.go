package sequence

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"sync"

	"mirrorloom/fitsutil"
)

// Write writes the sequence into the folder dir, which it makes if there is
// none. It fills in MaskID of every step, ProfileName, ProfileSHA, TargetSHA and
// SHA; those given already must be right. The bytes written depend on the
// sequence alone. sequence.fits comes last, so that a folder without it is not
// a sequence.
//
// Errors are an *Error for a sequence that is inconsistent or a folder that
// holds one already, or say which file could not be written. A folder in which
// Write failed or was cancelled is to be removed.
func (s *Sequence) Write(ctx context.Context, dir string) error {
	return s.write(ctx, dir, runtime.GOMAXPROCS(0))
}

func (s *Sequence) write(ctx context.Context, dir string, workers int) error {
	if err := s.prepare(); err != nil {
		return err
	}
	if err := claim(dir); err != nil {
		return err
	}
	if err := s.writeMasks(ctx, filepath.Join(dir, maskFolder), workers); err != nil {
		return err
	}
	if err := s.writeTexts(dir); err != nil {
		return err
	}
	path := filepath.Join(dir, fitsFile)
	if err := s.writeFITS(path); err != nil {
		return err
	}
	data, err := os.ReadFile(path)
	if err != nil {
		return fmt.Errorf("reading back: %w", err)
	}
	s.SHA = digest(data)
	return nil
}

// prepare checks the sequence and fills in what profile and target say.
func (s *Sequence) prepare() error {
	if s.Profile == nil || s.Target == nil {
		return fault("the sequence has no profile or no target")
	}
	if err := s.Profile.Validate(); err != nil {
		return fmt.Errorf("profile: %w", err)
	}
	if err := s.Target.Check(); err != nil {
		return fmt.Errorf("target: %w", err)
	}
	targetSHA, err := s.Target.SHA()
	if err != nil {
		return fmt.Errorf("target: %w", err)
	}
	for _, f := range []struct {
		card  string
		given *string
		due   string
	}{{"PROFNAME", &s.ProfileName, s.Profile.Name}, {"PROFSHA", &s.ProfileSHA, s.Profile.SHA()}, {"TARGSHA", &s.TargetSHA, targetSHA}} {
		if *f.given != "" && *f.given != f.due {
			return fault("%s is %s where profile and target give %s", f.card, *f.given, f.due)
		}
		*f.given = f.due
	}
	return s.check()
}

// claim makes the folder and refuses one that holds a sequence or masks, which
// would be mixed with the new ones.
func claim(dir string) error {
	for _, name := range []string{fitsFile, maskFolder} {
		_, err := os.Lstat(filepath.Join(dir, name))
		if err == nil {
			return &Error{File: dir, What: "the folder holds " + name + " already", Cure: "write the sequence into an empty folder"}
		}
		if !errors.Is(err, fs.ErrNotExist) {
			return fmt.Errorf("sequence folder: %w", err)
		}
	}
	if err := os.MkdirAll(filepath.Join(dir, maskFolder), 0o755); err != nil {
		return fmt.Errorf("sequence folder: %w; choose a folder that can be written", err)
	}
	return nil
}

// writeMasks writes one PNG a distinct mask and sets the MaskID of every step.
func (s *Sequence) writeMasks(ctx context.Context, dir string, workers int) error {
	var written sync.Map // of mask IDs: groups may share a mask
	return s.forEachGroup(ctx, workers, func(g *group, m *Mask) error {
		id := m.ID()
		for _, i := range g.steps {
			st := &s.Steps[i] // a step is in one group, so that no worker shares it
			if st.MaskID != "" && st.MaskID != id {
				return fault("step %d has MASKID %s where its mirrors give %s", st.Step, st.MaskID, id)
			}
			st.MaskID = id
		}
		if _, twice := written.LoadOrStore(id, true); twice {
			return nil
		}
		data, err := m.EncodePNG()
		if err != nil {
			return err
		}
		return writeFile(filepath.Join(dir, id+maskSuffix), data)
	})
}

// writeTexts writes the profile, the target and the CSV files they name.
func (s *Sequence) writeTexts(dir string) error {
	profile, err := s.Profile.YAML()
	if err != nil {
		return fmt.Errorf("profile: %w", err)
	}
	target, err := s.Target.YAML()
	if err != nil {
		return fmt.Errorf("target: %w", err)
	}
	files := s.Profile.Files()
	for name, data := range s.Target.Files() {
		if other, taken := files[name]; taken && !bytes.Equal(other, data) {
			return fault("profile and target name different files %s; rename one", name)
		}
		files[name] = data
	}
	for name, data := range map[string][]byte{profileFile: profile, targetFile: target} {
		if _, taken := files[name]; taken {
			return fault("profile or target names a file %s, which is a name of the sequence's own", name)
		}
		files[name] = data
	}
	for _, name := range slices.Sorted(maps.Keys(files)) {
		if err := writeFile(filepath.Join(dir, name), files[name]); err != nil {
			return err
		}
	}
	return nil
}

func writeFile(path string, data []byte) error {
	return fitsutil.WriteAtomic(path, func(w io.Writer) error {
		_, err := w.Write(data)
		return err
	})
}
