package reduce

import (
	"context"
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
)

// masterNight is calibrations without noise: a bias pattern, dark current, light of
// the all-off frames, a lamp; a hot pixel, a dead one and one without a value.
type masterNight struct{ prepare *prepare }

const (
	hotAt, deadAt, blankAt = 5*16 + 3, 9*16 + 11, 12*16 + 6 // row*16 + column
	testScienceSeconds     = 30.0
	testDarkSeconds        = 60.0
	testOffSeconds         = 20.0
)

func patternOf(x, y int) float64 { return 2 + 0.5*float64(x%4) - 0.25*float64(y%3) }

func darkOf(i int) float64 {
	if i == hotAt {
		return 40
	}
	return 0.1
}

func offOf(x, _ int) float64 { return 0.2 + 0.01*float64(x) }

func newMasterNight(t *testing.T) *masterNight {
	t.Helper()
	c, err := exposure.NewCamera(&instrument.Detector{
		Columns: 16, Rows: 20, SaturationADU: 60000,
		Amplifiers: []instrument.Amplifier{{Data: instrument.Section{1, 16, 1, 20}, GainEPerADU: 2, ReadNoiseE: 3, BiasADU: 100}},
	})
	require.NoError(t, err)
	take := func(name string, n int, light func(x, y int) float64) (list []*exposure.Frame) {
		for k := range n {
			list = append(list, writeFrame(t, name, 16, 20, func(x, y int) float32 {
				if y*16+x == blankAt && name == "dark" && k == 1 {
					return float32(math.NaN())
				}
				return float32(100 + (patternOf(x, y)+light(x, y))/2)
			}))
		}
		return list
	}
	dark := func(x, y int) float64 { return darkOf(y*16 + x) }
	p := &prepare{camera: c, album: &exposure.Album{}, workers: 2, memory: 1 << 20}
	p.recipe.SetDefaults()
	p.frames = calibration{
		bias: take("bias", 7, func(int, int) float64 { return 0 }),
		dark: take("dark", 5, func(x, y int) float64 { return testDarkSeconds * dark(x, y) }),
		off:  take("off", 4, func(x, y int) float64 { return testOffSeconds * (dark(x, y) + offOf(x, y)) }),
		lamps: lamps{on: take("lamp", 1, func(x, y int) float64 {
			if y*16+x == deadAt {
				return 0
			}
			return 4000
		})},
		scienceSeconds: testScienceSeconds, darkSeconds: testDarkSeconds, offSeconds: testOffSeconds,
	}
	return &masterNight{p}
}

// read runs prepare and reads the masters back.
func (n *masterNight) read(t *testing.T) (images [masterCount][]float32, bad int) {
	t.Helper()
	dir := t.TempDir()
	bad, err := n.prepare.run(context.Background(), dir, func(int) {})
	require.NoError(t, err)
	m, err := openMasters(dir)
	require.NoError(t, err)
	defer m.file.Close()
	for i, im := range m.images {
		images[i] = make([]float32, 16*20)
		require.NoError(t, im.ReadRows(images[i], 0, 20))
	}
	return images, bad
}

// The masters are the pattern, the rates and the flags that the frames were made
// from; the variance is that of what is taken off: with all-off frames for to and a
// bias from b frames, (t/to)^2 (R^2 + charge)/n + (1 - t/to)^2 R^2/b.
func TestMasters(t *testing.T) {
	images, bad := newMasterNight(t).read(t)
	require.Equal(t, 3, bad)
	quiet := 9 + 4.0/12
	ratio := testScienceSeconds / testOffSeconds
	for i := range 16 * 20 {
		x, y := i%16, i/16
		flag := calib.Flag(images[masterBad][i])
		if i == hotAt || i == deadAt || i == blankAt {
			require.Equal(t, calib.BadPixel, flag, "pixel %d", i)
			continue
		}
		require.Zero(t, flag, "pixel %d", i)
		require.InDelta(t, patternOf(x, y), images[masterBias][i], 1e-4)
		require.InDelta(t, 0.1, images[masterDark][i], 1e-5)
		require.InDelta(t, offOf(x, y), images[masterOff][i], 1e-5)
		charge := testOffSeconds * (0.1 + offOf(x, y))
		want := ratio*ratio*(quiet+charge)/4 + (1-ratio)*(1-ratio)*quiet/7
		require.InDelta(t, want, images[masterVariance][i], 1e-3)
	}
}

// Without all-off frames the dark alone is taken off; without dark the all-off
// frames hold the dark current; without bias nothing is assumed of it.
func TestMastersOfFewerKinds(t *testing.T) {
	quiet := 9 + 4.0/12
	at := 16*2 + 9
	n := newMasterNight(t)
	n.prepare.frames.off = nil
	images, _ := n.read(t)
	require.Zero(t, images[masterOff][at])
	require.InDelta(t, 0.1, images[masterDark][at], 1e-5)
	require.InDelta(t, 0.25*(quiet+6)/5+0.25*quiet/7, images[masterVariance][at], 1e-3)

	n = newMasterNight(t)
	n.prepare.frames.dark = nil
	images, bad := n.read(t)
	require.Equal(t, 1, bad, "no hot pixel is known without darks")
	require.Zero(t, images[masterDark][at])
	require.InDelta(t, 0.1+offOf(9, 2), images[masterOff][at], 1e-5)

	n = newMasterNight(t)
	n.prepare.frames.dark, n.prepare.frames.off = nil, nil
	images, _ = n.read(t)
	require.Zero(t, images[masterDark][at])
	require.InDelta(t, quiet/7, images[masterVariance][at], 1e-3)

	n = newMasterNight(t)
	n.prepare.recipe.Use = useOff
	images, bad = n.read(t)
	require.Zero(t, bad)
	for _, im := range images {
		require.Equal(t, make([]float32, 16*20), im)
	}
}

// Thirty times its own noise: 30^2 where photons make all of it.
func TestLevelAbove(t *testing.T) {
	require.InDelta(t, 900, levelAbove(0), 1e-9)
	for _, variance := range []float64{1, 9.3, 272} {
		level := levelAbove(variance)
		require.InDelta(t, 30, level/math.Sqrt(level+variance), 1e-9)
	}
}

// An end of the context ends the work.
func TestMastersInterrupted(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	_, err := newMasterNight(t).prepare.run(ctx, t.TempDir(), func(int) {})
	require.ErrorIs(t, err, context.Canceled)
}
