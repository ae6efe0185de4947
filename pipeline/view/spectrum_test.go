package view

import (
	"encoding/json"
	"fmt"
	"math"
	"net/http"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/extract"
)

// spectrumCase is a query and what extract is asked for the same.
type spectrumCase struct {
	query string
	shape func(t *testing.T) extract.SpectrumOptions
}

func shape(s *extract.Shape, err error) func(t *testing.T) extract.SpectrumOptions {
	return func(t *testing.T) extract.SpectrumOptions {
		t.Helper()
		require.NoError(t, err)
		return extract.SpectrumOptions{Aperture: s}
	}
}

func ringed(s *extract.Shape, err error) func(t *testing.T) extract.SpectrumOptions {
	return func(t *testing.T) extract.SpectrumOptions {
		t.Helper()
		require.NoError(t, err)
		around, err := extract.ParseAnnulus("1.4 3", s)
		require.NoError(t, err)
		return extract.SpectrumOptions{Aperture: s, Background: around, Optimal: true}
	}
}

var spectrumCases = []spectrumCase{
	{"shape=circle&j=11.25&y=7&r_arcsec=1.2", shape(extract.ParseCircle("11.25 7 1.2", true))},
	{"shape=circle&j=11&y=7&r_arcsec=1.2&inner_arcsec=1.4&outer_arcsec=3&optimal=1", ringed(extract.ParseCircle("11 7 1.2", true))},
	{"shape=ellipse&j=10&y=6.5&a_arcsec=1.5&b_arcsec=0.7&pa_deg=-30", shape(extract.ParseEllipse("10 6.5 1.5 0.7 -30", true))},
	{"shape=polygon&points=8,5,13,5.5,12,9", shape(extract.ParsePolygon("8 5 13 5.5 12 9", true))},
	{"shape=box&j0=8.5&y0=5.5&j1=10.5&y1=8.5", shape(extract.ParsePolygon("8.5 5.5 10.5 5.5 10.5 8.5 8.5 8.5", true))},
}

// list is what JSON says of a list: null for no number.
type list []*float64

func (x list) requireEqual(t *testing.T, want []float64, what string) {
	t.Helper()
	require.Len(t, x, len(want), what)
	for i, v := range want {
		if math.IsNaN(v) {
			require.Nil(t, x[i], "%s %d", what, i)
			continue
		}
		require.NotNil(t, x[i], "%s %d", what, i)
		require.Equal(t, v, *x[i], "%s %d", what, i)
	}
}

// The spectra are extract's to the last digit, from the cube as from what is kept, of a
// night and of two nights combined; and spectrum.csv is its file byte by byte.
func TestSpectraAreExtracts(t *testing.T) {
	for name, v := range map[string]*Viewer{
		"plain": plainViewer(t, runFolder(t, "run0")), "kept": readyViewer(t, runCopy(t)), "combined": plainViewer(t, runFolder(t, "all")),
	} {
		cube, err := extract.Open(v.dir)
		require.NoError(t, err)
		t.Cleanup(func() { cube.Close() })
		for i, c := range spectrumCases {
			t.Run(fmt.Sprint(name, i), func(t *testing.T) {
				o := c.shape(t)
				want, err := cube.Spectrum(t.Context(), o)
				require.NoError(t, err)
				var got struct {
					WavelengthNM                list `json:"wavelength_nm"`
					Signal, Error, Naive        list
					Coverage, Correlation       list
					Flags                       []int16
					Unit                        string
					Element, Row, RADeg, DecDeg float64
				}
				answered(t, v, "/api/spectrum?"+c.query, &got)
				got.WavelengthNM.requireEqual(t, want.WavelengthNM, "wavelength")
				got.Signal.requireEqual(t, want.Signal, "signal")
				got.Error.requireEqual(t, want.Error, "error")
				got.Naive.requireEqual(t, want.Naive, "naive")
				got.Coverage.requireEqual(t, want.Coverage, "coverage")
				require.Equal(t, want.Flags, got.Flags)
				require.Equal(t, cube.Unit, got.Unit)
				require.Equal(t, want.Element, got.Element)
				n := 0
				for l, r := range got.Correlation {
					if r != nil {
						n++
						require.Equal(t, want.Covariance[l][1]/math.Sqrt(want.Covariance[l][0]*want.Covariance[l+1][0]), *r)
					}
				}
				require.Positive(t, n)
				dir := t.TempDir()
				_, err = extract.Run(t.Context(), extract.Options{Run: v.dir, Out: dir, Spectrum: o})
				require.NoError(t, err)
				file, err := os.ReadFile(filepath.Join(dir, extract.SpectrumCSV))
				require.NoError(t, err)
				require.Equal(t, string(file), get(t, v, "/api/spectrum.csv?"+c.query).Body.String())
			})
		}
	}
}

// So are the fits of lines and the sums over bands.
func TestLinesAreExtracts(t *testing.T) {
	v := readyViewer(t, runCopy(t))
	o := spectrumCases[0].shape(t)
	o.Lines = &extract.LineOptions{RestNM: []float64{500}, MinSN: 3, RangeKmS: 400, VelocityKmS: 20}
	g := v.schema.Grid
	o.Bands = []extract.Band{{FromNM: g.WavelengthNM(9.5), ToNM: g.WavelengthNM(14.5), Sides: [][2]float64{{496.5, 498}}}}
	s, err := v.plain.Spectrum(t.Context(), o)
	require.NoError(t, err)
	want, err := json.Marshal(s.Answer(o, v.unit))
	require.NoError(t, err)
	w := get(t, v, "/api/line?"+spectrumCases[0].query+"&rest_nm=500&min_sn=3&range_km_s=400&velocity_km_s=20&from=10&to=14&continuum=496.5-498")
	require.Equal(t, http.StatusOK, w.Code, w.Body.String())
	require.JSONEq(t, string(want), w.Body.String())
	require.NotNil(t, s.Answer(o, v.unit).Lines.Lines[0].Flux, "there is a line to compare")
}

func TestLargeAperturesAreRefused(t *testing.T) {
	v := plainViewer(t, runFolder(t, "run0"))
	o := spectrumCases[0].shape(t)
	elements, cells, err := v.plain.Extent(o)
	require.NoError(t, err)
	require.NoError(t, fits(v.plain, o, elements, cells))
	require.ErrorContains(t, fits(v.plain, o, elements-1, cells), "mirrorloom extract")
	require.ErrorContains(t, fits(v.plain, o, elements, cells-1), "mirrorloom extract")
}
