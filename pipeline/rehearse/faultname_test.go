package rehearse

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestParseFault(t *testing.T) {
	for text, want := range map[string]Fault{
		"drift=0.05": {Drift, 0.05}, "trend=-0.3": {Trend, -0.3}, "lost=3": {Lost, 3}, "mislabel=4": {Mislabel, 4},
		"flip": {Flip, 0}, "flip=2": {Flip, 2}, "invert": {Invert, 0}, "cosmic=5e-1": {Cosmic, 0.5}, "leak=0": {Leak, 0},
	} {
		got, err := ParseFault(text)
		require.NoError(t, err, text)
		require.Equal(t, want, got)
	}
	for text, want := range map[string]string{
		"drift":      `fault "drift": it has no size; write drift=SIZE`,
		"drift=x":    `fault "drift=x": the size is no number; write it like drift=1`,
		"drift=0.9":  "fault drift=0.9: the size is outside 0 to 0.5; give one in this range",
		"drift=NaN":  "fault drift=NaN: the size is outside 0 to 0.5; give one in this range",
		"lost=1.5":   "fault lost=1.5: the size counts frames; give a whole number",
		"lost=Inf":   "fault lost=+Inf: the size is outside 0 to +Inf; give one in this range",
		"lost=-1":    "fault lost=-1: the size is outside 0 to +Inf; give one in this range",
		"mislabel=3": "fault mislabel=3: frames are exchanged in pairs; give an even number",
		"flip=0":     `fault "flip=0": no frame; leave the fault out, or the size for all frames`,
	} {
		_, err := ParseFault(text)
		require.EqualError(t, err, want, text)
	}
	_, err := ParseFault("dirft=1")
	require.ErrorContains(t, err, "there is no fault of this name; the faults are drift, trend")
	require.Len(t, FaultNames(), 17)
}

func FuzzParseFault(f *testing.F) {
	for _, name := range FaultNames() {
		f.Add(name)
		f.Add(name + "=2")
	}
	f.Fuzz(func(t *testing.T, text string) {
		fault, err := ParseFault(text)
		if err == nil {
			require.NoError(t, fault.check())
			require.True(t, strings.HasPrefix(text, fault.Name))
		}
	})
}
