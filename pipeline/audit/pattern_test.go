package audit

import (
	"testing"

	"github.com/stretchr/testify/require"
)

// What a frame's misfit with the mask of a row in use is does not depend on how that
// mask is predicted: from the row's own reading, or from the elements' light.
func TestRepeatedIsTheMisfit(t *testing.T) {
	f := newField(t, 31, 12, 200, 8, 3)
	e, err := newEngine(f.expose(f.night(0.05, 0.3, 1), 1))
	require.NoError(t, err)
	for _, missing := range [][]int{{4}, {4, 9}, {4, 9, 21, 22}} {
		erased := make([]bool, 31)
		for _, k := range missing {
			erased[k] = true
		}
		from := append([]int(nil), e.Pairing...)
		from[missing[len(missing)-1]] = none
		from[4] = e.Pairing[4]
		s := e.newState(from, erased)
		require.NotNil(t, s)
		for r := range 31 {
			if erased[r] {
				continue
			}
			want, wantNoise := s.misfit(4, s.bits(r))
			got, gotNoise := s.repeated(4, r)
			require.InEpsilon(t, want, got, 1e-8)
			require.InEpsilon(t, wantNoise, gotNoise, 1e-8)
		}
	}
}
