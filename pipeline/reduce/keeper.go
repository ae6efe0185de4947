package reduce

import (
	"context"
	"errors"
	"path/filepath"
	"sync"
	"time"

	"go.uber.org/zap"

	"mirrorloom/pipeline/kept"
)

// keeper writes the journal while a sweep runs. A record follows when the strips that it
// tells of have been brought to the disk, which goes on beside the work.
type keeper struct {
	r       *reduction
	w       *sweep
	journal *kept.Journal
	// recorded is the last mark that went into the journal, latest that of the last strip.
	recorded, latest mark
	// pending gives the outcome of the record that is on its way; nil for none.
	pending chan error
	// due is when the next record may begin.
	due time.Time
	// written is what of the cube's images of voxels was written, by whichever goroutine
	// writes.
	mu      sync.Mutex
	written writtenVoxels
	// failed: the journal could not be written, which stops it but not the reduction.
	failed bool
}

// writtenVoxels are the trace rows written, and the sums of the images of voxels then.
type writtenVoxels struct {
	rows int
	sums []uint32
}

// wrote notes that the next rows of the cube were written and counted.
func (k *keeper) wrote(out *outStrip) {
	k.mu.Lock()
	defer k.mu.Unlock()
	k.written = writtenVoxels{rows: out.y0 + out.h, sums: k.r.cube.Sums()[:voxelImages]}
}

// voxelsWritten is what wrote noted last.
func (k *keeper) voxelsWritten() writtenVoxels {
	k.mu.Lock()
	defer k.mu.Unlock()
	return k.written
}

// A record is begun when keepEvery times what the last one took have passed, which
// bounds its cost, within these limits: the shortest makes short nights resumable, the
// longest is what a power cut may cost.
const (
	keepEvery = 30
	keepLeast = 20 * time.Millisecond
	keepMost  = 10 * time.Second
)

func (r *reduction) journalPath() string { return filepath.Join(r.scratch(), journalFile) }

// startJournal begins a journal for the cubes just created.
func (r *reduction) startJournal() (*kept.Journal, error) {
	head := journalHead{State: r.state}
	if r.cube != nil {
		head.Cube = filepath.Base(r.cube.Unfinished())
	}
	if r.element != nil {
		head.Elements = filepath.Base(r.element.Unfinished())
	}
	record, err := encodeRecord(head)
	if err != nil {
		return nil, err
	}
	j, err := kept.CreateJournal(r.journalPath())
	if err != nil {
		return nil, err
	}
	if err := errors.Join(j.Append(record), j.Sync()); err != nil {
		return nil, errors.Join(err, j.Close())
	}
	return j, nil
}

// boundary notes the end of a strip, and begins a record if it is time.
func (k *keeper) boundary(decoded int) error {
	k.latest = k.r.mark(k.w, decoded, k.voxelsWritten())
	select {
	case err := <-k.pending:
		k.settle(err)
	default:
	}
	if k.failed || k.pending != nil || time.Now().Before(k.due) {
		return nil
	}
	record, err := k.r.record(k.w, &k.recorded, &k.latest)
	if err != nil {
		return err
	}
	k.recorded, k.pending = k.latest, make(chan error, 1)
	go func(done chan<- error) {
		start := time.Now()
		err := k.flush()
		if err == nil {
			err = errors.Join(k.journal.Append(record), k.journal.Sync())
		}
		took := time.Since(start)
		k.due = time.Now().Add(min(max(keepEvery*took, keepLeast), keepMost))
		k.r.log.Debug("strips kept", zap.Int("rows", decoded), zap.Float64("seconds", took.Seconds()))
		done <- err
	}(k.pending)
	if k.r.opts.eachStrip {
		k.settle(<-k.pending)
		k.due = time.Time{}
	}
	return nil
}

// settle takes note of what became of a record. A cube that cannot be brought to the disk
// knows it itself.
func (k *keeper) settle(err error) {
	k.pending = nil
	if err != nil {
		k.failed = true
		k.r.log.Warn("strips done from now on are not kept for --resume", zap.Error(err))
	}
}

// flush brings the cubes to the disk.
func (k *keeper) flush() error {
	var err error
	if k.r.cube != nil {
		err = k.r.cube.Flush()
	}
	if k.r.element != nil {
		err = errors.Join(err, k.r.element.Flush())
	}
	return err
}

// end ends a sweep that ended with failed. After a whole or an interrupted one the
// journal tells of its last strip: sky and finish may be interrupted as well. Nothing waits for the
// disk here: a record of strips that a power cut took away is found out by their sums.
func (k *keeper) end(failed error) error {
	if k.pending != nil {
		k.settle(<-k.pending)
	}
	if failed == nil {
		k.latest = k.r.mark(k.w, k.w.shape.rows, k.voxelsWritten())
	}
	if !k.failed && (failed == nil || errors.Is(failed, context.Canceled)) && k.latest.extent != k.recorded.extent {
		record, err := k.r.record(k.w, &k.recorded, &k.latest)
		if err == nil {
			err = k.journal.Append(record)
		}
		k.settle(err)
	}
	if k.journal != nil {
		k.journal.Close() // what it holds was written
	}
	return failed
}
