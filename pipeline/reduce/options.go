package reduce

import (
	"errors"
	"runtime"

	"go.uber.org/zap"
)

// Options of Run.
type Options struct {
	// Night is the folder of frames, Sequence that of the sequence.
	Night, Sequence string
	// NightName and SequenceName are what run.json calls them; empty for their paths.
	NightName, SequenceName string
	// Recipe is what to do; nil for the default.
	Recipe *Recipe
	// Cube and Elements ask for cube.fits and elements.fits.
	Cube, Elements bool
	// MemoryBytes bounds the memory of the process; 0 for DefaultMemoryBytes.
	MemoryBytes int64
	// Workers compute at the same time; 0 for one a processor.
	Workers int
	// Cycles are the numbers, from 1, of the cycles of science steps to use; none for all.
	Cycles []int
	// AsLabelled keeps the pairing of the frames' labels, whatever the audit finds.
	AsLabelled bool
	// Out is a folder that exists and is empty. A folder in which Run failed is to be
	// removed, unless a later Run is to go on with it.
	Out string
	// Resume goes on with what an earlier Run, killed or interrupted, left in Out, and
	// leaves there what a later one can go on with: see CanResume. What cannot be used is
	// cleared. Note, which may be nil, is told in a clause what became of it.
	Resume bool
	Note   func(clause string)
	// eachStrip is for tests: each strip is kept before the next one begins.
	eachStrip bool
	// Log receives what a user may want to know; nil for nothing.
	Log *zap.Logger
	// Progress, which may be nil, is called as a stage gets on, by one
	// goroutine at a time.
	Progress func(stage string, done, total int)
}

// DefaultMemoryBytes suits a laptop that does other things as well.
const DefaultMemoryBytes = 1 << 30

func (o *Options) setDefaults() error {
	if !o.Cube && !o.Elements {
		return errors.New("no product asked for; ask for cube, elements or both with --products")
	}
	if o.Workers <= 0 {
		o.Workers = runtime.GOMAXPROCS(0)
	}
	if o.MemoryBytes == 0 {
		o.MemoryBytes = DefaultMemoryBytes
	}
	if o.Log == nil {
		o.Log = zap.NewNop()
	}
	if o.Progress == nil {
		o.Progress = func(string, int, int) {}
	}
	if o.Note == nil {
		o.Note = func(string) {}
	}
	if o.NightName == "" {
		o.NightName = o.Night
	}
	if o.SequenceName == "" {
		o.SequenceName = o.Sequence
	}
	if o.Recipe == nil {
		recipe, err := LoadRecipe(DefaultRecipe)
		if err != nil {
			return err
		}
		o.Recipe = recipe
	}
	return nil
}
