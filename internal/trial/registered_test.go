package trial

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"
)

// A telescope turned by 4 degrees, of another scale and parity, and off by 2 arc seconds,
// scans stars with single columns; the next night is planned by what was learned.
func TestRegistered(t *testing.T) {
	tel := Telescope{RotationDeg: 4, Scale: 1.03, Parity: -1, OffsetU: 1.6, OffsetW: -1.1}
	list, err := tel.Registered(context.Background(), "telescope", t.TempDir())
	require.NoError(t, err)
	for _, f := range list {
		t.Log(f)
	}
	require.True(t, AllHold(list))
}
