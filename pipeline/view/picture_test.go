package view

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"image/png"
	"math"
	"net/http"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// pictureValues asks for a picture.
func pictureValues(t *testing.T, v *Viewer, query string) ([]float64, http.Header) {
	t.Helper()
	w := get(t, v, "/api/picture?"+query)
	require.Equal(t, http.StatusOK, w.Code, w.Body.String())
	raw := w.Body.Bytes()
	require.Len(t, raw, 4*v.schema.Elements*v.schema.Rows)
	all := make([]float64, len(raw)/4)
	for i := range all {
		all[i] = float64(math.Float32frombits(binary.LittleEndian.Uint32(raw[4*i:])))
	}
	return all, w.Header()
}

// Every layer of bands that lie in groups, across them and at the ends is what numpy makes
// of the cube as astropy reads it, whether planes were added up beforehand or not.
func TestCrosscheckPictures(t *testing.T) {
	run := runCopy(t)
	for name, v := range map[string]*Viewer{"planes": plainViewer(t, run), "sums": readyViewer(t, run)} {
		t.Run(name, func(t *testing.T) {
			dir, last := t.TempDir(), v.schema.Grid.Count-1
			require.Greater(t, last, groupPlanes, "the cube has more than one group")
			n := 0
			for _, band := range [][2]int{{0, last}, {3, 3}, {groupPlanes - 2, groupPlanes + 1}, {0, groupPlanes - 1}, {last - 3, last}} {
				for _, l := range layers {
					w := get(t, v, fmt.Sprintf("/api/picture?layer=%s&from=%d&to=%d", l, band[0], band[1]))
					require.Equal(t, http.StatusOK, w.Code, w.Body.String())
					require.NoError(t, os.WriteFile(filepath.Join(dir, fmt.Sprintf("%s-%d-%d.f32", l, band[0], band[1])), w.Body.Bytes(), 0o644))
					n++
				}
			}
			var diffs map[string]float64
			require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "view_pictures.py", filepath.Join(run, "cube.fits"), dir)), &diffs))
			require.Len(t, diffs, n)
			for picture, diff := range diffs {
				require.Less(t, diff, 1e-6, picture)
			}
		})
	}
}

// The limits are those of the values, and the quick picture of a wide band says how many
// planes it is made of.
func TestPictureHeaders(t *testing.T) {
	v := plainViewer(t, runFolder(t, "run0"))
	all, h := pictureValues(t, v, "layer=signal")
	known := slices.DeleteFunc(slices.Clone(all), math.IsNaN)
	slices.Sort(known)
	figure := func(name string) float64 {
		x, err := strconv.ParseFloat(h.Get(name), 64)
		require.NoError(t, err)
		return x
	}
	require.Equal(t, known[0], figure("X-Min"))
	require.Equal(t, known[len(known)-1], figure("X-Max"))
	below := func(x float64) float64 {
		n, _ := slices.BinarySearch(known, x)
		return float64(n) / float64(len(known))
	}
	require.InDelta(t, 0.02, below(figure("X-Low")), 1/float64(len(known)))
	require.InDelta(t, 0.98, below(figure("X-High")), 1/float64(len(known)))
	require.Equal(t, "ct", h.Get("X-Unit"))
	channels := v.schema.Grid.Count
	require.Equal(t, fmt.Sprintf("%d of %d", channels, channels), h.Get("X-Planes"))
	_, h = pictureValues(t, v, "sampled=1")
	require.Equal(t, fmt.Sprintf("%d of %d", quickPlanes, channels), h.Get("X-Planes"))
	ready := readyViewer(t, runCopy(t))
	same, h := pictureValues(t, ready, "sampled=1")
	require.Equal(t, fmt.Sprintf("%d of %d", channels, channels), h.Get("X-Planes"))
	for i, x := range same {
		require.True(t, x == all[i] || math.IsNaN(x) && math.IsNaN(all[i]) || math.Abs(x-all[i]) < 1e-6*math.Abs(all[i]))
	}
}

// The exports hold the same picture.
func TestPictureExports(t *testing.T) {
	v := plainViewer(t, runFolder(t, "run0"))
	all, h := pictureValues(t, v, "from=4&to=9")
	low, err := strconv.ParseFloat(h.Get("X-Low"), 64)
	require.NoError(t, err)
	w := get(t, v, fmt.Sprintf("/api/picture.png?from=4&to=9&low=%g&high=%g", low, 2*low+10))
	require.Equal(t, http.StatusOK, w.Code)
	im, err := png.Decode(bytes.NewReader(w.Body.Bytes()))
	require.NoError(t, err)
	n, rows := v.schema.Elements, v.schema.Rows
	across, along := im.Bounds().Dx()/n, im.Bounds().Dy()/rows
	require.InDelta(t, v.schema.C1Deg/v.schema.C2Deg, float64(across)/float64(along), 0.5*float64(across)/float64(along))
	for i, x := range all {
		r, _, _, alpha := im.At(i%n*across, (rows-1-i/n)*along).RGBA()
		if math.IsNaN(x) {
			require.Zero(t, alpha)
			continue
		}
		require.InDelta(t, 255*min(max((x-low)/(low+10), 0), 1), float64(r>>8), 0.51)
	}
	w = get(t, v, "/api/picture.csv?from=4&to=9")
	lines := strings.Split(strings.TrimSpace(w.Body.String()), "\n")
	require.Equal(t, "element,row,signal (ct)", lines[0])
	require.Len(t, lines, len(all)+1)
	for i, x := range all {
		want := fmt.Sprintf("%d,%d,", i%n, i/n)
		if !math.IsNaN(x) {
			want += strconv.FormatFloat(x, 'g', -1, 32)
		}
		require.Equal(t, want, lines[i+1])
	}
}
