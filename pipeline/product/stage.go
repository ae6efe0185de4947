package product

import "fmt"

// Stage is one stage of a run: its wall-clock time and the bytes of pixels and tables
// that it read and wrote. The headers of frames are not counted: a stage that reads
// nothing else, such as pair, has 0. The other figures are left out where they were not
// measured.
type Stage struct {
	Name    string  `json:"name"`
	Seconds float64 `json:"seconds"`
	Bytes   int64   `json:"bytes"`
	// GBPerS is 10^9 bytes a second.
	GBPerS float64 `json:"gb_per_s,omitempty"`
	// ReadingS and WritingS are the seconds in which the system read from files, and in
	// which it wrote to them or brought them to the disk. ComputingS is the processor's
	// time, of the program and of the system for it, a worker's share of it: all workers
	// were busy so long. WaitingS is what is left of Seconds: for the disk, for each other
	// or for other programs. The first three may overlap.
	ReadingS   float64 `json:"reading_s,omitempty"`
	ComputingS float64 `json:"computing_s,omitempty"`
	WritingS   float64 `json:"writing_s,omitempty"`
	WaitingS   float64 `json:"waiting_s,omitempty"`
	// Bottleneck is what took longest, Times how much longer than what comes next; 0
	// beside nothing.
	Bottleneck Bottleneck `json:"bottleneck,omitempty"`
	Times      float64    `json:"bottleneck_times,omitempty"`
}

// Bottleneck is what a stage would have to do faster to be faster.
type Bottleneck string

// The bottlenecks.
const (
	DiskRead  Bottleneck = "disk read"
	Processor Bottleneck = "processor"
	DiskWrite Bottleneck = "disk write"
)

// NewStage makes a stage that took so many seconds, of which reading and writing took some;
// processorS is the processor's time, which workers shared.
func NewStage(name string, seconds float64, bytes int64, readingS, writingS, processorS float64, workers int) Stage {
	s := Stage{Name: name, Seconds: seconds, Bytes: bytes, ReadingS: readingS, WritingS: writingS, ComputingS: processorS / float64(max(1, workers))}
	s.WaitingS = max(0, seconds-s.ComputingS)
	if seconds > 0 {
		s.GBPerS = float64(bytes) / seconds / 1e9
	}
	next := 0.0
	for _, part := range []struct {
		what    Bottleneck
		seconds float64
	}{{Processor, s.ComputingS}, {DiskRead, readingS}, {DiskWrite, writingS}} {
		switch most := s.busiest(); {
		case part.seconds > most:
			s.Bottleneck, next = part.what, most
		case part.seconds > next:
			next = part.seconds
		}
	}
	if next > 0 {
		s.Times = s.busiest() / next
	}
	return s
}

// busiest is the time of the bottleneck.
func (s Stage) busiest() float64 {
	switch s.Bottleneck {
	case DiskRead:
		return s.ReadingS
	case DiskWrite:
		return s.WritingS
	case Processor:
		return s.ComputingS
	}
	return 0
}

// BottleneckWords say it for a table; empty where nothing was measured.
func (s Stage) BottleneckWords() string {
	switch {
	case s.Bottleneck == "":
		return ""
	case s.Times == 0:
		return string(s.Bottleneck)
	case s.Times >= 99.5:
		return fmt.Sprintf("%s, over 99 times", s.Bottleneck)
	}
	return fmt.Sprintf("%s, %.1f times", s.Bottleneck, s.Times)
}
