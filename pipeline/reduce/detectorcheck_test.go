package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"
	"go.uber.org/zap"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
)

func TestFirstPairs(t *testing.T) {
	frames := make([]*exposure.Frame, 9)
	for i := range frames {
		frames[i] = &exposure.Frame{Step: i}
	}
	require.Empty(t, firstPairs(frames[:1], true))
	require.Len(t, firstPairs(frames[:3], true), 1)
	pairs := firstPairs(frames, false)
	require.Len(t, pairs, transferPairs)
	require.Equal(t, [2]*exposure.Frame{frames[4], frames[5]}, pairs[2].frames)
	require.False(t, pairs[2].dark)
}

// A value is worth a warning where it is 3 % and 4 of its errors off.
func TestCompareWithTheProfile(t *testing.T) {
	for _, c := range []struct {
		value, err, profile float64
		warns               bool
	}{
		{1.30, 0.001, 1.28, false},                         // sure, but too little to matter
		{1.40, 0.05, 1.28, false},                          // large, but not sure
		{1.40, 0.02, 1.28, true}, {1.15, 0.01, 1.28, true}, // both
	} {
		r := &reduction{log: zap.NewNop(), roles: &roles{}}
		r.compare(0, "gain", c.value, c.err, c.profile, "e/ADU")
		require.Equal(t, c.warns, len(r.roles.warnings) == 1, "%+v", c)
		require.Empty(t, r.roles.degraded)
		if c.warns {
			require.Regexp(t, `^amplifier 1: the gain measured is 1\.[0-9]+ \+- 0\.0[12] e/ADU, the profile's 1\.28`, r.roles.warnings[0])
		}
	}
}

// Around every listed line and every peak three widths are hidden, and the rest is not.
func TestHideLines(t *testing.T) {
	seq := smallSequence(t, instrument.Square, nil)
	r := endsOf(seq)
	flags := make([]calib.Flag, testColumns)
	r.hideLines(flags, calib.ArcFrame{Element: 5, Lines: []calib.LampLine{{VacuumNM: seq.Profile.Spectrograph.CenterNM, Intensity: 1}}}, 12)
	// Element 5 of 11 is the middle one: its line lies at x_c = 19.5 but for the slit's
	// tilt of 0.015 over 0.3 rows. 3 x 3.2 px reach from 9.9 to 29.1.
	for x, f := range flags {
		require.Equal(t, x >= 9 && x <= 29, f&calib.NoData != 0, "column %d", x)
	}
	clear(flags)
	r.hideLines(flags, calib.ArcFrame{Peaks: []calib.Peak{{X: 2}}}, 12)
	for x, f := range flags {
		require.Equal(t, x <= 11, f&calib.NoData != 0, "column %d", x)
	}
}
