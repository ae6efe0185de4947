package rehearse

import (
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
)

// Frames start after the last one's exposure, its reading, and the loading of the mask.
func TestFramesWaitForMasks(t *testing.T) {
	p := smallProfile(t, "optical")
	loads := 2.5
	p.DMD.LoadS = &loads
	seq := planned(t, p, smallTarget(p))
	dir, _ := rehearsed(t, seq, &Scene{SeeingFWHMArcsec: 1}, Options{Perfect: true, NoTruth: true})
	start := func(step int) time.Time {
		f, err := fitsutil.Open(filepath.Join(dir, FrameFile(step+1)))
		require.NoError(t, err)
		defer f.Close() // only read from
		im, err := f.FirstImage()
		require.NoError(t, err)
		text, err := im.Header.Str(p.Keywords.DateObs)
		require.NoError(t, err)
		at, err := time.Parse("2006-01-02T15:04:05.000", text)
		require.NoError(t, err)
		return at
	}
	for step := range 3 {
		want := seq.Steps[step].ExptimeSeconds + p.Detector.ReadS + loads
		require.InDelta(t, want, start(step+1).Sub(start(step)).Seconds(), 1e-3)
	}
}
