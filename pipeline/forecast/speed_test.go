package forecast

import (
	"context"
	"fmt"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// wide is the embedded optical profile grown to 1024 mirrors a row and a detector of 2048
// columns, under the demo's sky, wanting bands and lines.
func wide(t testing.TB) *Light {
	sky, err := scene.Load("demo")
	require.NoError(t, err)
	var wanted []sequence.Wanted
	for i := 1; i < 6; i++ {
		source := i
		wanted = append(wanted, sequence.Wanted{Name: fmt.Sprint("star ", i), Source: &source, BandNM: []float64{560, 600}})
	}
	ring, nm := 0, 500.887
	wanted = append(wanted, sequence.Wanted{Name: "ring", Source: &ring, LineNM: &nm})
	return newTestLight(t, "optical", "demo", *sky, wanted, func(p *instrument.Profile, _ *sequence.Target) {
		p.DMD.Columns, p.DMD.Rows = 1024, 1024
		d := &p.Detector
		d.Columns, d.Rows = 2048, 1200
		d.Amplifiers = d.Amplifiers[:1]
		d.Amplifiers[0].Data, d.Amplifiers[0].Overscan = instrument.Section{1, 2048, 1, 1200}, nil
		p.Spectrograph.XCenterPx, p.Spectrograph.YCenterPx = 1023.5, 599.5
		p.Spectrograph.SmilePerPx, p.Spectrograph.TraceTilt, p.Spectrograph.TraceCurvePerPx = 1e-6, 0.003, 1e-7
	})
}

// A forecast for v = 1023 takes well under the 5 s that a whole choice may, and the next
// candidate of the same elements far less.
func TestForecastIsFast(t *testing.T) {
	l := wide(t)
	c := Candidate{Family: "m-sequence", V: 1023, N: 895, Dark: 128, ElementMirrors: 1, DwellSeconds: 60, Cycles: 1}
	start := time.Now()
	r, err := l.Of(context.Background(), c)
	require.NoError(t, err)
	first := time.Since(start)
	c.DwellSeconds = 30
	start = time.Now()
	_, err = l.Of(context.Background(), c)
	require.NoError(t, err)
	t.Logf("first %v, next %v, S/N %v", first, time.Since(start), r.Wanted[0].SNR)
}
