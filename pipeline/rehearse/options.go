package rehearse

import (
	"fmt"
	"runtime"
)

// Options of Run. The zero value is a night of seed 0 with an imperfect
// instrument and no fault.
type Options struct {
	// Seed is where all random numbers come from.
	Seed uint64
	// Perfect makes the true geometry the profile's, the pixels' response and
	// the slit function 1, the efficiency smooth, the detector as linear as the
	// profile says and the lamps those of the list.
	Perfect bool
	// Noiseless leaves out photon, read and rounding noise and the bias' drift;
	// frames then hold float32 ADU.
	Noiseless bool
	// Faults of the night, each name at most once.
	Faults []Fault
	// NoTruth leaves out truth.fits, which takes most of the time of a large
	// night.
	NoTruth bool
	// Workers is the number of goroutines, GOMAXPROCS by default. The bytes
	// written do not depend on it.
	Workers int
	// MemoryBytes is about how much memory to use, 256 MiB by default; the bytes
	// written do not depend on it.
	MemoryBytes int64
}

const defaultMemory = 256 << 20

func (o *Options) complete() error {
	if o.Workers == 0 {
		o.Workers = runtime.GOMAXPROCS(0)
	}
	if o.MemoryBytes == 0 {
		o.MemoryBytes = defaultMemory
	}
	if o.Workers < 1 {
		return fmt.Errorf("workers: %d is no number of workers; give 1 or more", o.Workers)
	}
	if o.MemoryBytes < 1<<20 {
		return fmt.Errorf("memory: %d bytes are too few; give 1 MiB or more", o.MemoryBytes)
	}
	return nil
}
