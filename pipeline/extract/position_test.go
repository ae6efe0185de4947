package extract

import (
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

func TestParseRA(t *testing.T) {
	for text, want := range map[string]float64{
		"123.3": 123.3, "0": 0, "08:13:12.0": 123.3, "8h13m12s": 123.3, "8h": 120, "08:13": 123.25, "23:59:59.999": 359.99999583,
	} {
		got, err := ParseRA(text)
		require.NoError(t, err, text)
		require.InDelta(t, want, got, 1e-7, text)
	}
}

func TestParseDec(t *testing.T) {
	for text, want := range map[string]float64{
		"21.6": 21.6, "+21:36:00": 21.6, "-21d36m": -21.6, "-0:30:00": -0.5, "-00:00:36": -0.01, "90": 90, "-12d": -12,
	} {
		got, err := ParseDec(text)
		require.NoError(t, err, text)
		require.InDelta(t, want, got, 1e-9, text)
	}
}

func TestParseRefuses(t *testing.T) {
	for _, text := range []string{"", "x", "1:2:3:4", "08:60:00", "8.5:13", "361", "24:00:00", "-1", "NaN", "1e400", "0x10", "8m13h", "8h13", "inf", "--1", "1..2"} {
		_, err := ParseRA(text)
		require.Error(t, err, text)
	}
	for _, text := range []string{"", "90.1", "-91", "1:2:60", "1:-2:3", "12d61m", "nan"} {
		_, err := ParseDec(text)
		require.Error(t, err, text)
	}
}

// Sexagesimal texts of any place read back to it.
func TestSexagesimalReadsBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		ms := rapid.IntRange(0, 24*3600*1000-1).Draw(t, "ms")
		text := fmt.Sprintf("%d:%02d:%06.3f", ms/3600000, ms/60000%60, float64(ms%60000)/1000)
		got, err := ParseRA(text)
		require.NoError(t, err)
		require.InDelta(t, float64(ms)/240000, got, 1e-9)
	})
}

func FuzzParsePosition(f *testing.F) {
	for _, s := range []string{"123.3", "08:13:12.0", "-21d36m00s", "8h", "-0:0:1", ":::", "+"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if ra, err := ParseRA(s); err == nil && !(ra >= 0 && ra < 360) {
			t.Fatal(s, ra)
		}
		if dec, err := ParseDec(s); err == nil && !(math.Abs(dec) <= 90) {
			t.Fatal(s, dec)
		}
	})
}
