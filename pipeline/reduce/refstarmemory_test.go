package reduce

import (
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/sequence"
)

// Refstar frames that do not fit are refused with the least memory that is enough; without
// them nothing is.
func TestStarMemory(t *testing.T) {
	recipe, err := LoadRecipe(DefaultRecipe)
	require.NoError(t, err)
	target := &sequence.Target{Calibration: sequence.Calibration{RefStar: &sequence.RefStarFrames{Count: 3}}}
	r := &reduction{
		seq:    &sequence.Sequence{Target: target, Steps: []sequence.Step{{Step: 1, Kind: sequence.RefStar}}},
		camera: &exposure.Camera{Columns: 4000, Rows: 4000}, opts: Options{MemoryBytes: 512 << 20, Recipe: recipe},
	}
	err = r.checkStarMemory()
	require.ErrorContains(t, err, "--memory of 512 MiB is too little for refstar frames of 4000 x 4000 pixels")
	var least int64
	_, scanErr := fmt.Sscanf(err.Error(), "--memory of 512 MiB is too little for refstar frames of 4000 x 4000 pixels; give at least %d MiB", &least)
	require.NoError(t, scanErr)
	require.Greater(t, least, int64(4000*4000*starBytes>>20))
	r.opts.MemoryBytes = (least - 1) << 20
	require.Error(t, r.checkStarMemory())
	r.opts.MemoryBytes = least << 20
	require.NoError(t, r.checkStarMemory())
	r.opts.MemoryBytes, r.seq.Steps = 1, nil
	require.NoError(t, r.checkStarMemory())
}
