package reduce

import (
	"fmt"

	"mirrorloom/pipeline/sequence"
)

// starBytes is the memory of a pixel while frames of the reference star are averaged: the
// mean, a frame and the one before it, which may not be given back yet, the largest of the
// samples, and the masters while they are read. edgeBytes is what the search of one frame
// alone takes more: its noise and the planes of its fine structure.
const (
	starBytes = 3*exposureBytes + 5*bytesFloat + 2
	edgeBytes = 6 * bytesFloat
)

// checkStarMemory refuses what the frames of the reference star would not fit into: they are
// looked at whole.
func (r *reduction) checkStarMemory() error {
	star := r.seq.Target.Calibration.RefStar
	if len(r.seq.StepsOf(sequence.RefStar)) == 0 || star == nil {
		return nil
	}
	each := int64(starBytes)
	if star.Count == 1 {
		each += edgeBytes
	}
	if r.opts.Recipe.Flat.Use != useOff {
		each += exposureBytes // the pixels' response
	}
	if need := each*int64(r.camera.Columns)*int64(r.camera.Rows) + runtimeBytes; need > r.opts.MemoryBytes {
		return fmt.Errorf("--memory of %d MiB is too little for refstar frames of %d x %d pixels; give at least %d MiB, or say `flux: {use: off}` in the recipe", r.opts.MemoryBytes>>20, r.camera.Columns, r.camera.Rows, need>>20+1)
	}
	return nil
}
