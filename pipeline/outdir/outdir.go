// Package outdir gives every command that writes a folder the same manners.
//
// Work goes to a folder `<path>.part` beside the one asked for, which appears
// under its own name only when it is whole. A folder that is not empty is
// refused unless it is to be replaced, and then the old one stays until the new
// one is whole. What a run reads is never replaced by what it writes. An
// interrupted run leaves no `.part`; one left by a killed run is cleared by the
// next, while a second run at the same time is refused. A run that can go on where an
// earlier one ended begins with Resume, which clears nothing, and may end with Leave.
package outdir

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"golang.org/x/sys/unix"
)

// ErrNotEmpty marks a folder that holds something and is not to be replaced.
var ErrNotEmpty = errors.New("the output folder is not empty")

// ErrInput marks a folder that holds what the run is to read.
var ErrInput = errors.New("the output folder would replace an input")

// ErrBusy marks a folder that another run is writing just now.
var ErrBusy = errors.New("another run is writing this output folder")

// Dir is an output folder being made. Exactly one of Commit, Leave and Abort ends it;
// Abort after the others does nothing, so that it can be deferred.
type Dir struct {
	final, part string
	lock        *os.File // the .part folder itself, locked while we live
	parents     []string // folders made on the way to it, the deepest first
}

// Begin makes `<path>.part`. It is an error (ErrNotEmpty) if path holds
// anything and replace is false, or if path is a file; ErrInput if one of the
// inputs, files or folders that the run reads, is path or lies in it; ErrBusy if
// another run holds the same `.part`.
func Begin(path string, replace bool, inputs ...string) (*Dir, error) {
	return begin(path, replace, false, inputs)
}

// Resume is Begin, but what an earlier run left in `<path>.part` stays there.
func Resume(path string, replace bool, inputs ...string) (*Dir, error) {
	return begin(path, replace, true, inputs)
}

func begin(path string, replace, resume bool, inputs []string) (*Dir, error) {
	if path == "" {
		return nil, errors.New("no output folder given; name one with -o")
	}
	final, err := filepath.Abs(path)
	if err != nil {
		return nil, fmt.Errorf("output folder %s: %w", path, err)
	}
	if err := refuseUnfit(final, replace); err != nil {
		return nil, err
	}
	if err := refuseInputs(final, inputs); err != nil {
		return nil, err
	}
	d := &Dir{final: final, part: final + ".part"}
	if err := d.makeParents(); err != nil {
		return nil, err
	}
	if err := d.claim(resume); err != nil {
		d.removeParents()
		return nil, err
	}
	return d, nil
}

// makeParents makes the folders on the way to the output, and remembers them:
// a failed run takes them away again.
func (d *Dir) makeParents() error {
	parent := filepath.Dir(d.final)
	for at := parent; ; at = filepath.Dir(at) {
		if _, err := os.Lstat(at); !errors.Is(err, fs.ErrNotExist) {
			break // it is there, or MkdirAll will say what is wrong
		}
		d.parents = append(d.parents, at)
	}
	if err := os.MkdirAll(parent, 0o755); err != nil {
		d.removeParents()
		return fmt.Errorf("output folder %s: %w; choose a place that can be written", d.final, plain(err))
	}
	return nil
}

// removeParents takes away what makeParents made, where nothing else came to
// lie in it.
func (d *Dir) removeParents() {
	for _, p := range d.parents {
		if os.Remove(p) != nil {
			return
		}
	}
}

// refuseInputs compares places rather than names: two names may lead to one
// folder.
func refuseInputs(final string, inputs []string) error {
	out, err := filepath.EvalSymlinks(final)
	if err != nil {
		return nil // nothing is there to be replaced
	}
	for _, input := range inputs {
		at, err := filepath.Abs(input)
		if err == nil {
			at, err = filepath.EvalSymlinks(at)
		}
		if err != nil {
			continue // the name of a built-in, or what its reader will refuse
		}
		if rel, err := filepath.Rel(out, at); err == nil && rel != ".." && !strings.HasPrefix(rel, "../") {
			return fmt.Errorf("%w: %s holds %s; choose another with -o", ErrInput, final, input)
		}
	}
	return nil
}

func refuseUnfit(final string, replace bool) error {
	entries, err := os.ReadDir(final)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil
	case err != nil:
		return fmt.Errorf("output folder %s: %w; choose another with -o", final, plain(err))
	case len(entries) > 0 && !replace:
		return fmt.Errorf("%w: %s; choose another with -o or pass --replace", ErrNotEmpty, final)
	}
	return nil
}

// claim makes the .part folder and locks it; what a killed run left is cleared unless it
// is to be gone on with.
func (d *Dir) claim(resume bool) error {
	err := os.Mkdir(d.part, 0o755)
	stale := errors.Is(err, fs.ErrExist)
	if err != nil && !stale {
		return fmt.Errorf("output folder %s: %w; choose a place that can be written", d.part, plain(err))
	}
	f, err := os.Open(d.part)
	if err != nil {
		return fmt.Errorf("output folder %s: %w", d.part, plain(err))
	}
	if err := unix.Flock(int(f.Fd()), unix.LOCK_EX|unix.LOCK_NB); err != nil {
		f.Close()
		if errors.Is(err, unix.EWOULDBLOCK) {
			return fmt.Errorf("%w: %s; wait for it to end or choose another with -o", ErrBusy, d.final)
		}
		return fmt.Errorf("lock %s: %w", d.part, err)
	}
	d.lock = f
	if !stale || resume {
		return nil
	}
	entries, err := os.ReadDir(d.part)
	if err != nil {
		return errors.Join(fmt.Errorf("clear %s: %w", d.part, plain(err)), d.Abort())
	}
	for _, e := range entries {
		if err := os.RemoveAll(filepath.Join(d.part, e.Name())); err != nil {
			return errors.Join(fmt.Errorf("clear %s: %w", d.part, plain(err)), d.Abort())
		}
	}
	return nil
}

// Path is the folder to write into until Commit.
func (d *Dir) Path() string { return d.part }

// Commit gives the folder its own name, in one step where the file system can
// exchange two folders, and then removes what it replaced.
func (d *Dir) Commit() error {
	if d.lock == nil {
		return errors.New("internal error: output folder committed twice")
	}
	if err := d.lock.Sync(); err != nil && !errors.Is(err, unix.EINVAL) {
		return errors.Join(fmt.Errorf("flush %s: %w", d.part, err), d.Abort())
	}
	if err := d.swap(); err != nil {
		return errors.Join(fmt.Errorf("give %s its name: %w", d.final, err), d.Abort())
	}
	err := d.lock.Close()
	d.lock = nil
	return err
}

func (d *Dir) swap() error {
	// An empty folder, or none, gives way at once.
	if err := os.Remove(d.final); err == nil || errors.Is(err, fs.ErrNotExist) {
		return os.Rename(d.part, d.final)
	}
	err := unix.Renameat2(unix.AT_FDCWD, d.part, unix.AT_FDCWD, d.final, unix.RENAME_EXCHANGE)
	if err == nil {
		return os.RemoveAll(d.part)
	}
	// Not every file system exchanges: move the old one aside instead.
	aside := d.final + ".replaced"
	if err := os.RemoveAll(aside); err != nil {
		return err
	}
	if err := os.Rename(d.final, aside); err != nil {
		return err
	}
	if err := os.Rename(d.part, d.final); err != nil {
		return errors.Join(err, os.Rename(aside, d.final))
	}
	return os.RemoveAll(aside)
}

// Leave ends the work and leaves the unfinished folder for a later Resume.
func (d *Dir) Leave() error {
	if d.lock == nil {
		return errors.New("internal error: output folder left twice")
	}
	err := d.lock.Close()
	d.lock = nil
	return err
}

// Abort removes the unfinished folder. After Commit and Leave it does nothing.
func (d *Dir) Abort() error {
	if d.lock == nil {
		return nil
	}
	err := os.RemoveAll(d.part)
	err = errors.Join(err, d.lock.Close())
	d.lock = nil
	d.removeParents()
	return err
}

// plain strips the call's name from an error of the file system: "open x: not a
// directory" names the path a second time.
func plain(err error) error {
	var path *fs.PathError
	if errors.As(err, &path) {
		return errors.New(strings.ToLower(path.Err.Error()))
	}
	return err
}
