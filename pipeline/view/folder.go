package view

import (
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"time"

	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/rowfile"
)

// CacheFolder is made in a run.
const CacheFolder = ".cache"

// State of what is kept of a run.
type State string

// The states.
const (
	Making State = "making"
	Ready  State = "ready"
	None   State = "none" // nothing can be kept, see Note
)

// Progress says how far it is.
type Progress struct {
	State State  `json:"state"`
	Stage string `json:"stage"`
	Done  int    `json:"done"`
	Total int    `json:"total"`
	// Folder is where it is kept; Note says why it is not in the run, or not at all.
	Folder string `json:"folder"`
	Note   string `json:"note"`
	Bytes  int64  `json:"bytes"`
}

// folder is where things are kept, and how far they are.
type folder struct {
	path string // empty for nowhere
	stop context.CancelFunc
	mu   sync.Mutex
	now  Progress
}

// chooseFolder is the run's own, or one of the user's where that cannot be written.
func chooseFolder(run string) *folder {
	own := filepath.Join(run, CacheFolder)
	if writable(own) {
		return newFolder(own, "")
	}
	absolute, err := filepath.Abs(run)
	if err == nil {
		if user, err := os.UserCacheDir(); err == nil {
			dir := filepath.Join(user, "mirrorloom", fmt.Sprintf("%x", sha256.Sum256([]byte(absolute)))[:16])
			if writable(dir) {
				return newFolder(dir, own+" cannot be written, so your own cache folder is used")
			}
		}
	}
	f := newFolder("", "neither "+own+" nor your cache folder can be written, so spectra take longer")
	f.now.State = None
	return f
}

func newFolder(path, note string) *folder {
	return &folder{path: path, now: Progress{State: Making, Folder: path, Note: note}, stop: func() {}}
}

func (f *folder) progress() Progress {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.now
}

// tell how far a stage is.
func (f *folder) tell(stage string, done, total int) {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.now.Stage, f.now.Done, f.now.Total = stage, done, total
}

func (f *folder) end(state State, note string) {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.now.State = state
	if note != "" {
		f.now.Note = note
	}
}

// old is how long what somebody else may be making is left alone.
const old = time.Hour

// headStart is what the first picture gets before anything else reads the cube.
const headStart = 500 * time.Millisecond

// keep makes what is kept of the run and begins to use it.
func (v *Viewer) keep(ctx context.Context) {
	f := v.folder
	if f.path == "" {
		return
	}
	f.mu.Lock()
	f.now.Bytes = v.CacheBytes()
	f.mu.Unlock()
	select {
	case <-time.After(headStart):
	case <-ctx.Done():
	}
	err := v.make(ctx)
	switch {
	case err == nil:
		f.end(Ready, "")
	case ctx.Err() != nil:
		f.end(None, "")
	default:
		f.end(None, fmt.Sprintf("what makes spectra fast could not be kept (%v), so they take longer", err))
	}
}

func (v *Viewer) make(ctx context.Context) error {
	f := v.folder
	if err := f.tidy(v.plain); err != nil {
		return err
	}
	tell := func(stage string) func(done, total int) {
		return func(done, total int) {
			f.tell(stage, done, total)
			v.giveWay(ctx)
		}
	}
	sums, err := v.makeSums(ctx, tell("planes"))
	if err != nil {
		return err
	}
	v.later(sums)
	v.sums.Store(sums)
	if err := v.plain.MakeRows(ctx, f.path, tell("rows")); err != nil {
		return err
	}
	rows, err := v.plain.OpenRows(f.path)
	if err != nil {
		return err
	}
	v.later(rows)
	v.rows.Store(v.plain.WithRows(rows))
	return nil
}

// What is kept is made between answers: for at most longestPause an answer is let through
// first, so that somebody who asks without end does not keep it from being made.
const (
	longestPause = 300 * time.Millisecond
	shortPause   = 5 * time.Millisecond
)

// giveWay lets answers be computed first.
func (v *Viewer) giveWay(ctx context.Context) {
	for until := time.Now().Add(longestPause); v.busy.Load() > 0 && ctx.Err() == nil && time.Now().Before(until); {
		time.Sleep(shortPause)
	}
}

// damaged goes on without what is kept where err says that it is damaged; it is removed, to
// be made again when the run is opened next. It tells whether that was so.
func (v *Viewer) damaged(err error) bool {
	if !errors.Is(err, rowfile.ErrDamaged) || v.folder.path == "" {
		return false
	}
	v.rows.Store(nil)
	v.sums.Store(nil)
	note := "what was kept of the run was damaged and has been removed; start view again to make it anew"
	if err := errors.Join(v.plain.RemoveRows(v.folder.path), os.Remove(v.sumsPath())); err != nil && !errors.Is(err, fs.ErrNotExist) {
		note = fmt.Sprintf("what was kept of the run is damaged and cannot be removed (%v)", err)
	}
	v.folder.end(None, note)
	return true
}

// tidy removes what was kept of cubes that are gone, and what interrupted work left: all
// but what belongs to a cube and its runs.
func (f *folder) tidy(c *extract.Cube) error {
	entries, err := os.ReadDir(f.path)
	if err != nil {
		return err
	}
	ours := map[string]bool{}
	for _, name := range c.RowsNames() {
		ours[name] = true
	}
	ours[sumsName(c)] = true
	for _, e := range entries {
		name, part := e.Name(), strings.HasPrefix(e.Name(), ".")
		if ours[name] || !strings.HasPrefix(strings.TrimPrefix(name, "."), "rows-") && !strings.HasPrefix(strings.TrimPrefix(name, "."), "sums-") {
			continue
		}
		info, err := e.Info()
		if err != nil || !info.Mode().IsRegular() || part && time.Since(info.ModTime()) < old {
			continue
		}
		if err := os.Remove(filepath.Join(f.path, name)); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	return nil
}
