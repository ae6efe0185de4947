package report

import (
	"testing"

	"github.com/stretchr/testify/require"
)

// By hand.
func TestSexagesimal(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{raWords(8*3600+13*60+12, 1), "08:13:12"},
		{raWords(8*3600+13*60+12.25, 0.05), "08:13:12.25"},
		{raWords(59.999, 0.1), "00:01:00.0"},
		{raWords(-0.5, 0.5), "23:59:59.5"},
		{raWords(86400+60, 60), "00:01:00"},
		{decWords(21*3600+36*60+7, 1), "+21:36:07"},
		{decWords(-(5*3600 + 0.5), 0.5), "−05:00:00.5"},
		{decWords(0, 10), "+00:00:00"},
	} {
		require.Equal(t, c.want, c.got)
	}
}

// A field about a pole has parallels all around it; lines stay within the field.
func TestSkyGridAtAPole(t *testing.T) {
	s := skyPlane{refX: 20, refY: 30, stepX: 1, stepY: 1, raDeg: 10, decDeg: 89.999}
	s.cd = [2][2]float64{{-1, 0}, {0, 1}}
	lines := skyGrid(s, 40, 60)
	meridians, parallels := 0, 0
	for _, l := range lines {
		if l.dec {
			parallels++
		} else {
			meridians++
		}
		for _, p := range l.points {
			require.True(t, p[0] >= -0.5001 && p[0] <= 39.5001 && p[1] >= -0.5001 && p[1] <= 59.5001, "%v", p)
		}
	}
	require.Greater(t, meridians, 5)
	require.Greater(t, parallels, 1)
}
