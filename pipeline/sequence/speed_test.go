package sequence_test

import (
	"context"
	"fmt"
	"os"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// largest plans v coded steps for a device of 2048 x 1080 mirrors and a
// detector that sees all of it.
func largest(t testing.TB, v int, mounting string) *sequence.Sequence {
	t.Helper()
	profile, err := instrument.Load("optical")
	require.NoError(t, err)
	profile.DMD.Columns, profile.DMD.Rows, profile.DMD.Mounting = 2048, 1080, mounting
	profile.Detector.Columns, profile.Detector.Rows = 4096, 1200
	amplifier := profile.Detector.Amplifiers[0]
	amplifier.Data, amplifier.Overscan = instrument.Section{1, 4096, 1, 1200}, nil
	profile.Detector.Amplifiers = []instrument.Amplifier{amplifier}
	profile.Spectrograph.XCenterPx, profile.Spectrograph.YCenterPx = 2047.5, 599.5
	profile.Spectrograph.TraceTilt, profile.Spectrograph.TraceCurvePerPx = 0.001, 0
	target, err := sequence.LoadTarget("demo")
	require.NoError(t, err)
	dark := 128
	target.Code.V, target.Code.Dark = &v, &dark
	target.SentinelRows = []sequence.SentinelRow{{First: 500, Last: 510, Element: 100}}
	target.Calibration = sequence.Calibration{Arc: sequence.ArcFrames{Every: 1}}
	target.AllOffEvery = 0
	return build(t, target, profile)
}

// 1023 masks of 2048 x 1080 mirrors are written in 20 s and read back in a minute, whatever the
// mounting.
func TestSpeedOfLargestDevice(t *testing.T) {
	if os.Getenv("MIRRORLOOM_VALIDATE") == "" {
		t.Skip("writes 1023 masks of 2048 x 1080 mirrors: run by make validate")
	}
	for _, mounting := range []string{instrument.Square, instrument.Diagonal} {
		t.Run(mounting, func(t *testing.T) {
			start := time.Now()
			s := largest(t, 1023, mounting)
			planned := time.Since(start)
			start = time.Now()
			dir := write(t, s)
			written := time.Since(start)
			start = time.Now()
			_, err := sequence.Read(context.Background(), dir)
			require.NoError(t, err)
			read := time.Since(start)
			t.Logf("planned in %v, written in %v, read in %v", planned, written, read)
			require.Less(t, written, 20*time.Second)
			require.Less(t, read, 60*time.Second)
		})
	}
}

func BenchmarkMask(b *testing.B) {
	s := largest(b, 1023, instrument.Square)
	m := s.Mask(0)
	png, err := m.EncodePNG()
	require.NoError(b, err)
	for _, step := range []struct {
		name string
		run  func() error
	}{
		{"expand", func() error { s.Mask(0); return nil }},
		{"id", func() error { m.ID(); return nil }},
		{"encode", func() error { _, err := m.EncodePNG(); return err }},
		{"decode", func() error { _, err := sequence.DecodePNG(png, m.Columns, m.Rows); return err }},
	} {
		b.Run(fmt.Sprintf("%s/%dx%d", step.name, m.Columns, m.Rows), func(b *testing.B) {
			b.SetBytes(int64(len(m.On)))
			for b.Loop() {
				if err := step.run(); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
