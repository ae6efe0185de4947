package reduce

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/kept"
	"mirrorloom/pipeline/product"
)

// CanResume tells whether a folder in which Run was killed, interrupted or failed holds
// what a later Run with Resume can go on with.
func CanResume(out string) bool {
	_, err := os.Stat(filepath.Join(out, "scratch", preparedFile))
	return err == nil
}

// resume goes on with what an earlier run left, if it is asked for; what cannot be used
// is cleared.
func (r *reduction) resume() error {
	if !r.opts.Resume {
		return nil
	}
	p, why := r.loadPrepared()
	if why == nil {
		if err := r.clear(r.leftCubes()); err != nil {
			return err
		}
		r.resumed = true
		return r.takePrepared(p)
	}
	if !errors.Is(why, errNoState) {
		r.opts.Note(fmt.Sprintf("the unfinished run is started over: %v", why))
	}
	return r.clear(nil)
}

// leftCubes are the files that the journal names, and the names that they have once they
// are whole.
func (r *reduction) leftCubes() map[string]bool {
	keep := map[string]bool{r.preparedPath(): true, filepath.Join(r.scratch(), mastersFile): true, r.journalPath(): true}
	head, j, err := r.readJournal(nil)
	if err != nil {
		return keep
	}
	j.Close() // opened again with the strips
	for _, c := range []struct{ path, name string }{{r.cubePath(), head.Cube}, {r.elementsPath(), head.Elements}} {
		if c.name == "" {
			continue
		}
		unfinished := filepath.Join(filepath.Dir(c.path), c.name)
		if _, err := os.Lstat(unfinished); err != nil {
			unfinished = c.path
		}
		keep[unfinished] = true
	}
	return keep
}

// clear removes all from the folder but what is to be kept, by path.
func (r *reduction) clear(keep map[string]bool) error {
	for _, dir := range []string{r.scratch(), r.opts.Out} {
		entries, err := os.ReadDir(dir)
		if err != nil {
			return err
		}
		for _, e := range entries {
			path := filepath.Join(dir, e.Name())
			if path == r.scratch() || keep[path] {
				continue
			}
			if err := os.RemoveAll(path); err != nil {
				return fmt.Errorf("clear %s: %w", dir, err)
			}
		}
	}
	return nil
}

func (r *reduction) elementsPath() string { return filepath.Join(r.opts.Out, product.ElementsFile) }

// readJournal opens the journal of this state. strip is given the records of strips and
// tells whether they follow; nil reads none.
func (r *reduction) readJournal(strip func(s *stripRecord) bool) (*journalHead, *kept.Journal, error) {
	var head *journalHead
	own := true
	j, err := kept.OpenJournal(r.journalPath(), func(record []byte) bool {
		if head == nil {
			head = new(journalHead)
			own = decodeRecord(record, head) == nil && head.State == r.state
			return own
		}
		if strip == nil {
			return true
		}
		var s stripRecord
		return decodeRecord(record, &s) == nil && strip(&s)
	})
	if errors.Is(err, os.ErrNotExist) {
		return nil, nil, errNoState
	}
	if err != nil {
		return nil, nil, err
	}
	if head == nil || !own {
		return nil, nil, errors.Join(errors.New("its journal is damaged"), j.Close())
	}
	return head, j, nil
}

// newKeeper opens the products and the journal for a sweep, and gives it what an earlier
// one gathered.
func (r *reduction) newKeeper(w *sweep) (*keeper, error) {
	k := &keeper{r: r, w: w}
	if r.opts.Resume {
		why := r.goOn(k)
		switch {
		case why == nil:
			r.opts.Note(fmt.Sprintf("the unfinished run is gone on with: %d of %d rows of the detector are done", k.recorded.decoded, w.shape.rows))
			return k, nil
		case !r.resumed:
		case errors.Is(why, errNoState):
			r.opts.Note("the unfinished run is gone on with: its calibration is done")
		default:
			r.opts.Note(fmt.Sprintf("the strips of the unfinished run are begun anew: %v", why))
		}
		if err := r.clear(map[string]bool{r.preparedPath(): true, filepath.Join(r.scratch(), mastersFile): true}); err != nil {
			return nil, err
		}
	}
	if err := r.create(w.shape); err != nil {
		return nil, err
	}
	var err error
	if k.journal, err = r.startJournal(); err != nil {
		k.settle(err)
	}
	return k, nil
}

// goOn takes up the journal and the cubes of an earlier run. After an error nothing is
// open, and the sweep is as before.
func (r *reduction) goOn(k *keeper) error {
	w := k.w
	w.clear()
	var m mark
	head, journal, err := r.readJournal(func(s *stripRecord) bool { return r.take(w, &m, s) })
	if err == nil {
		if err = r.reopen(w.shape, head, &m); err != nil {
			err = errors.Join(err, journal.Close())
		}
	}
	if err != nil {
		w.clear()
		r.forgetPicture()
		return err
	}
	for i, n := range m.saturated {
		w.reader.tally.frames[i].Saturated = n
	}
	w.before = m.extent
	for y := w.firstAgain(); y < m.decoded; y++ {
		w.quality[y].forgetDecoding()
	}
	k.journal, k.recorded, k.latest = journal, m, m
	if w.rectify != nil {
		k.written = writtenVoxels{m.nextOut, m.cubeSums[:voxelImages]}
	}
	return nil
}

// reopen opens the unfinished cubes that a journal tells of.
func (r *reduction) reopen(s shape, head *journalHead, m *mark) error {
	if s.cube != (head.Cube != "") || s.elementCube != (head.Elements != "") || m.decoded == 0 {
		return errNoState // no strip is done
	}
	primary, err := r.primary()
	if err != nil {
		return err
	}
	if s.cube {
		images, err := r.cubeImages(product.OnSky{})
		if err != nil {
			return err
		}
		if r.cube, err = fitsutil.ReopenCube(r.cubePath(), filepath.Join(filepath.Dir(r.cubePath()), head.Cube), primary.Clone(), images, m.cubeProgress()); err != nil {
			return err
		}
		r.cube.CountInto(&r.traffic)
	}
	if s.elementCube {
		images, err := product.ElementImages(s.columns, s.rows, s.slots)
		if err == nil {
			r.element, err = fitsutil.ReopenCube(r.elementsPath(), filepath.Join(r.opts.Out, head.Elements), primary.Clone(), images, m.elementProgress())
		}
		if err != nil {
			if r.cube != nil {
				err = errors.Join(err, r.cube.Suspend())
				r.cube = nil
			}
			return err
		}
		r.element.CountInto(&r.traffic)
	}
	return nil
}
