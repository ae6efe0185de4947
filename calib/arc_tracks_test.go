package calib

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// trackPeaks are the centroids of lines at x in blocks of 8 rows from row 4 on, along
// a slit of the given deviation from nominal.
func trackPeaks(x []float64, blocks int, slant func(q float64) float64) []Peak {
	var peaks []Peak
	for b := range blocks {
		first := 4 + 8*b
		for _, at := range x {
			peaks = append(peaks, Peak{FirstRow: first, LastRow: first + 7, X: at + slant(float64(first)+3.5-48), XErr: 0.01, FWHM: 3.4, Flux: 1e4})
		}
	}
	return peaks
}

// Lines are followed along a slit that leans by a degree and bends by 3 px more than
// nominal; cosmic rays are left over; gaps do not part a line.
func TestFollowTracks(t *testing.T) {
	slant := func(q float64) float64 { return q * (0.0175 + 3.0/(48*48)*q) }
	peaks := trackPeaks([]float64{50, 56, 90}, 11, slant)
	random := rand.New(rand.NewPCG(1, 1))
	random.Shuffle(len(peaks), func(i, k int) { peaks[i], peaks[k] = peaks[k], peaks[i] })
	// Lost: three blocks of the line at 90.
	kept := peaks[:0]
	for _, p := range peaks {
		if p.X > 80 && (p.FirstRow == 20 || p.FirstRow == 28 || p.FirstRow == 60) {
			continue
		}
		kept = append(kept, p)
	}
	for _, row := range []int{12, 44, 68} {
		kept = append(kept, Peak{FirstRow: row, LastRow: row + 7, X: 70 + float64(row)/3, XErr: 0.05})
	}
	tracks := followTracks(0, &ArcFrame{Element: 7, Peaks: kept}, func(float64) float64 { return 0 })
	require.Len(t, tracks, 3)
	lengths := []int{len(tracks[0].peaks), len(tracks[1].peaks), len(tracks[2].peaks)}
	require.ElementsMatch(t, []int{11, 11, 8}, lengths)
	nominal := Geometry{Y_c: 48}
	tilt, smile, ok := straighten(tracks, &nominal)
	require.True(t, ok)
	require.InDelta(t, 0.0175, tilt, 1e-9)
	require.InDelta(t, 3.0/(48*48), smile, 1e-9)
	for i, x := range []float64{50, 56, 90} {
		require.InDelta(t, x, tracks[i].x, 1e-6)
		require.Equal(t, 7, tracks[i].element)
	}
}

// A block alone, and nothing: no slant can be told, and the nominal one stays.
func TestFollowFewTracks(t *testing.T) {
	nominal := Geometry{Y_c: 48, SlitTilt: 0.02}
	tracks := followTracks(0, &ArcFrame{Peaks: trackPeaks([]float64{50, 60}, 1, func(float64) float64 { return 0 })}, func(float64) float64 { return 0 })
	require.Len(t, tracks, 2)
	tilt, smile, ok := straighten(tracks, &nominal)
	require.False(t, ok)
	require.Equal(t, []float64{0.02, 0}, []float64{tilt, smile})
	require.InDelta(t, 50-0.02*(7.5-48), tracks[0].x, 1e-12)
	require.Empty(t, followTracks(0, &ArcFrame{}, func(float64) float64 { return 0 }))
}
