package rehearse

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/sequence"
)

// Seeing, guiding and shift: the second moment, the place on the mirrors and the
// place on the detector of a star of one line, in frames with all elements open.
func TestFaultWander(t *testing.T) {
	p := smallDark(t)
	seq := faultSequence(t, p, "m-sequence", 15, 3)
	scene := &Scene{SeeingFWHMArcsec: 1, Sources: []Source{{Kind: KindStar, EastArcsec: 0.2, NorthArcsec: 0.3, Lines: []Line{{WavelengthNM: 580, FluxWM2: 2e-16}}}}}
	clean, faulty, truth := pairOf(t, seq, scene, Fault{Seeing, 0.1}, Fault{Guide, 0.3}, Fault{Shift, 0.4})
	const em = 2
	for _, k := range seq.StepsOf(sequence.AllOn) {
		f := truth.Frames[k]
		x0, y0, v0 := moments(electrons(t, clean, seq, k, 0))
		x1, y1, v1 := moments(electrons(t, faulty, seq, k, 0))
		s := p.Spectrograph
		dx, dy := f.GuideU*em*s.UStepPx+f.ShiftX, f.GuideW*em*s.WStepPx+f.ShiftY
		// Along the tilted slit and the tilted trace one move brings the other.
		require.InDelta(t, dx+s.SlitTilt*f.GuideW*em*s.WStepPx, x1-x0, 0.005)
		require.InDelta(t, dy+s.TraceTilt*f.GuideU*em*s.UStepPx, y1-y0, 0.005)
		sigma := 1 / 2.35482 / p.DMD.ArcsecPerMirror * s.WStepPx
		require.InDelta(t, sigma*sigma*((1+f.Seeing)*(1+f.Seeing)-1), v1-v0, 0.01*sigma*sigma)
		require.NotZero(t, f.Seeing*f.GuideU*f.GuideW*f.ShiftX*f.ShiftY)
	}
	// Lamps are shifted and nothing else.
	arc := seq.StepsOf(sequence.Flat)[0]
	_, y0, _ := moments(electrons(t, clean, seq, arc, 0))
	_, y1, _ := moments(electrons(t, faulty, seq, arc, 0))
	require.InDelta(t, truth.Frames[arc].ShiftY, y1-y0, 0.01)
}

// moments are the centroid and the variance along y of an image.
func moments(image [][]float64) (x, y, variance float64) {
	sum := sumOf(image)
	for j, row := range image {
		for i, e := range row {
			x += e * float64(i) / sum
			y += e * float64(j) / sum
		}
	}
	for j, row := range image {
		for _, e := range row {
			variance += e * math.Pow(float64(j)-y, 2) / sum
		}
	}
	return x, y, variance
}

// Frames drawn one by one are those summed from beams, but for the leak's
// structure, which is taken at mirror rows in the one and at detector rows in
// the other.
func TestRedrawnFramesAreTheSame(t *testing.T) {
	target := smallTarget(smallDark(t))
	target.SentinelRows = []sequence.SentinelRow{{First: 25, Last: 27, Element: 3}}
	seq := planned(t, smallDark(t), target)
	faults := []Fault{{Colour, 0.1}, {SkyLines, 0.2}, {Neighbour, 0.02}, {Drift, 0.1}}
	for _, c := range []struct {
		faults    []Fault
		perfect   bool
		tolerance float64
	}{{faults, false, 1e-6}, {append(faults, Fault{Leak, 0.002}), true, 1e-3}} {
		opts := Options{Seed: 5, Perfect: c.perfect, Noiseless: true, NoTruth: true, Faults: c.faults}
		summed, _ := rehearsed(t, seq, smallScene(580), opts)
		opts.Faults = append(opts.Faults, Fault{Shift, 1e-12})
		redrawn, _ := rehearsed(t, seq, smallScene(580), opts)
		worst := 0.0
		for k := range seq.Steps {
			a, _, _ := frame(t, summed, k)
			b, _, _ := frame(t, redrawn, k)
			most := 0.0
			for i := range a {
				most = math.Max(most, float64(a[i]))
			}
			for i := range a {
				worst = math.Max(worst, math.Abs(float64(a[i]-b[i]))/most)
			}
		}
		t.Logf("worst difference %.1e of a frame's peak", worst)
		require.Less(t, worst, c.tolerance)
	}
}
