package fitsutil

import (
	"errors"
	"path/filepath"
	"sync"
	"testing"
	"testing/synctest"
	"time"

	"github.com/stretchr/testify/require"
)

// Calls that overlap count once, bytes of those that fail do not.
func TestTrafficTime(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var traffic Traffic
		call := func(delay, length time.Duration) func() error {
			return func() error { time.Sleep(delay); time.Sleep(length); return nil }
		}
		var all sync.WaitGroup
		all.Go(func() { _ = traffic.reading(10, call(0, 4*time.Second)) })
		time.Sleep(3 * time.Second)
		all.Go(func() { _ = traffic.reading(20, call(0, 4*time.Second)) })
		require.Equal(t, Flow{0, 3 * time.Second}, traffic.Read(), "one that still runs")
		all.Wait()
		require.Equal(t, Flow{30, 7 * time.Second}, traffic.Read())
		time.Sleep(time.Second)
		failed := errors.New("no")
		require.ErrorIs(t, traffic.writing(5, func() error { time.Sleep(time.Second); return failed }), failed)
		require.Equal(t, Flow{30, 7 * time.Second}, traffic.Read())
		require.Equal(t, Flow{0, time.Second}, traffic.Written())
		var none *Traffic
		require.NoError(t, none.writing(5, func() error { return nil }))
	})
}

// A cube and a file count their data.
func TestTrafficBytes(t *testing.T) {
	path := filepath.Join(t.TempDir(), "c.fits")
	c, err := CreateCube(path, NewHeader(), []ImageSpec{{Name: "A", BITPIX: -32, Axes: []int{7, 5, 3}}})
	require.NoError(t, err)
	defer c.Abort()
	var traffic Traffic
	c.CountInto(&traffic)
	require.NoError(t, c.WriteStrip(0, 0, 2, 0, 3, make([]float32, 7*2*3)))
	require.NoError(t, c.WriteStrip(0, 2, 3, 0, 3, make([]float32, 7*3*3)))
	c.BeginSync()
	require.NoError(t, c.Commit())
	require.EqualValues(t, 4*7*5*3, traffic.Written().Bytes)
	require.Positive(t, traffic.Written().Busy)

	f, err := Open(path)
	require.NoError(t, err)
	defer f.Close()
	f.CountInto(&traffic)
	im, err := f.ImageNamed("A")
	require.NoError(t, err)
	require.NoError(t, im.ReadPlaneRows(make([]float32, 14), 2, 1, 3))
	require.EqualValues(t, 4*14, traffic.Read().Bytes)
}
