package fitsutil

import (
	"sync"
	"time"
)

// Traffic adds up what goes between files and memory: bytes of data (not of headers), and
// the time in which at least one call of the system that reads, or writes and syncs, was
// waited for. Files and cubes that are told to (CountInto) add to it; a nil one counts
// nothing. Safe for concurrent use.
type Traffic struct {
	read, written meter
}

// Flow is what went one way.
type Flow struct {
	Bytes int64
	Busy  time.Duration
}

// Read and Written are what went so far.
func (t *Traffic) Read() Flow    { return t.read.flow() }
func (t *Traffic) Written() Flow { return t.written.flow() }

// meter counts calls that may overlap: time in which several run counts once.
type meter struct {
	mu      sync.Mutex
	running int
	since   time.Time // of the first of those that run
	done    Flow
}

func (m *meter) flow() Flow {
	m.mu.Lock()
	defer m.mu.Unlock()
	f := m.done
	if m.running > 0 {
		f.Busy += time.Since(m.since)
	}
	return f
}

func (m *meter) begin() {
	m.mu.Lock()
	if m.running == 0 {
		m.since = time.Now()
	}
	m.running++
	m.mu.Unlock()
}

func (m *meter) end(bytes int) {
	m.mu.Lock()
	m.running--
	if m.running == 0 {
		m.done.Busy += time.Since(m.since)
	}
	m.done.Bytes += int64(bytes)
	m.mu.Unlock()
}

// reading runs a call that reads so many bytes, writing one that writes them.
func (t *Traffic) reading(bytes int, call func() error) error { return t.run(true, bytes, call) }
func (t *Traffic) writing(bytes int, call func() error) error { return t.run(false, bytes, call) }

func (t *Traffic) run(reads bool, bytes int, call func() error) error {
	if t == nil {
		return call()
	}
	m := &t.written
	if reads {
		m = &t.read
	}
	m.begin()
	err := call()
	if err != nil {
		bytes = 0
	}
	m.end(bytes)
	return err
}

// CountInto has reads of the file's data add to t from now on; nil for none. It must not be
// called while the file is read from.
func (f *File) CountInto(t *Traffic) { f.traffic = t }

// CountInto has the writes and the sync of the cube add to t; nil for none. It must not be
// called while the cube is written to.
func (c *Cube) CountInto(t *Traffic) { c.out.part.traffic = t }
