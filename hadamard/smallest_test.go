package hadamard

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// TestSmallest: worked by hand from the rule v-n >= max(16, floor((v+1)/8)).
func TestSmallest(t *testing.T) {
	for _, x := range []struct {
		f       Family
		n, dark int
		want    int
	}{
		{MSequence, 47, -1, 63},   // 63-47 = 16
		{MSequence, 48, -1, 127},  // 63-48 = 15 < 16
		{MSequence, 111, -1, 127}, // 16 = 128/8
		{MSequence, 112, -1, 255},
		{MSequence, 223, -1, 255}, // 32 = 256/8
		{MSequence, 224, -1, 511},
		{MSequence, 447, -1, 511}, // 64
		{MSequence, 448, -1, 1023},
		{MSequence, 448, 63, 511},
		{MSequence, 448, 64, 1023},
		{MSequence, 511, 0, 511},
		{MSequence, 1, 0, 3},
		{MSequence, 3584, -1, 0}, // 4095-3584 = 511 < 512
		{MSequence, 3583, -1, 4095},
		{Legendre, 200, -1, 239}, // 227-200 = 27 < 28 = floor(228/8); 239-200 = 39
		{Legendre, 100, 3, 103},
		{TwinPrime, 19, -1, 35},
		{TwinPrime, 20, -1, 143},
		{SlitScan, 77, -1, 77},
		{SlitScan, 77, 40, 77},
		{SlitScan, 4095, -1, 4095},
		{SlitScan, 4096, 0, 0},
		{MSequence, 5, math.MaxInt, 0},
		{MSequence, math.MaxInt, 5, 0},
	} {
		c, err := Smallest(x.f, x.n, x.dark)
		if x.want == 0 {
			var no *NoCodeError
			require.ErrorAs(t, err, &no)
			require.Equal(t, x.n, no.Elements)
			continue
		}
		require.NoError(t, err)
		require.Equal(t, x.want, c.V(), "%+v", x)
		require.Equal(t, x.f, c.Family())
	}
	_, err := Smallest(MSequence, 0, -1)
	require.Error(t, err)
	_, err = Smallest("other", 10, -1)
	require.ErrorIs(t, err, ErrUnknownFamily)
	_, err = Smallest(MSequence, 4000, -1)
	require.EqualError(t, err, "no m-sequence code up to v = 4095 holds 4000 elements and the default dark columns: use wider elements or fewer dark columns")
	_, err = Smallest(Legendre, 4000, 200)
	require.EqualError(t, err, "no legendre code up to v = 4095 holds 4000 elements and 200 dark columns: use wider elements or fewer dark columns")
}

// TestSmallestIsSmallest: the size satisfies the rule and no smaller one does.
func TestSmallestIsSmallest(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := rapid.SampledFrom(cyclicFamilies()).Draw(t, "family")
		n := rapid.IntRange(1, 3000).Draw(t, "n")
		dark := rapid.IntRange(-1, 300).Draw(t, "dark")
		fits := func(v int) bool {
			if dark < 0 {
				return v-n >= 16 && v-n >= (v+1)/8
			}
			return v >= n+dark
		}
		c, err := Smallest(f, n, dark)
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range Sizes(f) {
			if v < c.V() && fits(v) || v == c.V() && !fits(v) {
				t.Fatalf("%s for %d and %d: %d, but %d", f, n, dark, c.V(), v)
			}
		}
	})
}
