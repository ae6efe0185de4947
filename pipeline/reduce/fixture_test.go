package reduce

import (
	"context"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// Test detectors are so large.
const testColumns, testRows = 40, 24

// smallSequence plans an m-sequence of 15 columns, 4 of them dark, on a small
// square or diagonal device; change may alter target and profile before.
func smallSequence(t testing.TB, mounting string, change func(*sequence.Target, *instrument.Profile)) *sequence.Sequence {
	t.Helper()
	name := "optical"
	if mounting == instrument.Diagonal {
		name = "infrared"
	}
	p, err := instrument.Load(name)
	require.NoError(t, err)
	target, err := sequence.LoadTarget("demo")
	require.NoError(t, err)
	p.Detector.Columns, p.Detector.Rows = testColumns, testRows
	p.Detector.Amplifiers = p.Detector.Amplifiers[:1]
	p.Detector.Amplifiers[0].Data, p.Detector.Amplifiers[0].Overscan = instrument.Section{1, testColumns, 1, testRows}, nil
	p.DMD.Columns, p.DMD.Rows = 24, 16
	p.Spectrograph.XCenterPx, p.Spectrograph.YCenterPx = 19.5, 11.7
	p.Grid.FirstNM, p.Grid.Count = p.Spectrograph.CenterNM-4*p.Grid.StepNM, 9
	v, dark := 15, 4
	target.Code.Family, target.Code.V, target.Code.Dark, target.Code.ElementMirrors = "m-sequence", &v, &dark, 2
	target.Calibration.Flat, target.Calibration.Arc = sequence.FlatFrames{}, sequence.ArcFrames{Every: 1}
	if change != nil {
		change(target, p)
	}
	seq, _, err := plan.Build(context.Background(), target, p)
	require.NoError(t, err)
	return seq
}

// writeFrame writes a raw frame, its pixels given by x and y from 0, and opens it.
func writeFrame(t testing.TB, name string, columns, rows int, value func(x, y int) float32) *exposure.Frame {
	t.Helper()
	data := make([]float32, columns*rows)
	for i := range data {
		data[i] = value(i%columns, i/columns)
	}
	path := filepath.Join(t.TempDir(), name)
	require.NoError(t, fitsutil.WriteFile(path, nil, &fitsutil.ImageData{Axes: []int{columns, rows}, Data: data}))
	file, err := fitsutil.Open(path)
	require.NoError(t, err)
	t.Cleanup(func() { require.NoError(t, file.Close()) })
	image, err := file.FirstImage()
	require.NoError(t, err)
	return &exposure.Frame{Name: name, Image: image}
}
