package calib

import (
	"encoding/json"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"mirrorloom/calib/physics"
	"mirrorloom/internal/outside"
)

func TestCrosscheckFluxTable(t *testing.T) {
	var cases []struct {
		Text  string
		Flux  []float64
		Means [][3]float64
	}
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_flux.py")), &cases))
	require.Len(t, cases, 5)
	for _, c := range cases {
		table, err := ParseFluxTable("star.csv", []byte(c.Text))
		require.NoError(t, err)
		require.Len(t, table.Flux, len(c.Flux))
		for i, f := range c.Flux {
			require.InEpsilon(t, f, table.Flux[i], 1e-12)
		}
		for _, m := range c.Means {
			require.InEpsilon(t, m[2], table.Mean(m[0], m[1]), 1e-12)
		}
	}
}

func TestFluxTable(t *testing.T) {
	table, err := ParseFluxTable("s.csv", []byte("wavelength_air_nm,flux_aw_m2_nm\n400,2\n500,4\n"))
	require.NoError(t, err)
	require.Equal(t, []float64{physics.AirToVacuum(400), physics.AirToVacuum(500)}, table.VacuumNm)
	table = FluxTable{VacuumNm: []float64{400, 500, 600}, Flux: []float64{2, 4, 2}}
	require.InDelta(t, 3, table.Mean(400, 600), 1e-15)
	require.InDelta(t, 3.9, table.Mean(490, 510), 1e-12)
	for _, r := range [][2]float64{{399, 450}, {550, 601}, {500, 500}, {510, 500}} {
		require.True(t, math.IsNaN(table.Mean(r[0], r[1])))
	}
	require.True(t, math.IsNaN(FluxTable{}.Mean(1, 2)))
}

func TestWrongFluxTables(t *testing.T) {
	const head = "wavelength_nm,flux_jy\n"
	for _, c := range []struct{ text, want string }{
		{"", "s.csv: the file is empty"},
		{"wavelength,flux_jy\n", `s.csv:1: the columns "wavelength" and "flux_jy" are unknown; write wavelength_nm`},
		{"wavelength_nm,flux\n", "s.csv:1: the columns"},
		{"wavelength_nm,flux_jy,error\n", "s.csv:1: not CSV of two fields"},
		{head + "400,1\n400,2\n", "s.csv:3: wavelengths must ascend"},
		{head + "400,1\n", "s.csv: 1 rows are no table"},
		{head + "400,1\n500,0\n", "s.csv:3: 0 is no flux above 0"},
		{head + "400,1\n500,NaN\n", "s.csv:3: NaN is no flux above 0"},
		{head + "0.4,1\n", "s.csv:2: a wavelength of 0.4 nm is outside 180 to 30000; give nanometres"},
		{head + "400,1\n500,x\n", `s.csv:3: "500" and "x" are not two numbers`},
		{head + "400,1\n\"500,1\n", "s.csv:3: not CSV of two fields"},
	} {
		_, err := ParseFluxTable("s.csv", []byte(c.text))
		require.ErrorContains(t, err, c.want, "%q", c.text)
	}
}

// What parses is a usable table.
func FuzzFluxTable(f *testing.F) {
	f.Add([]byte("wavelength_nm,flux_jy\n400,1\n500,2.5e-3\n"))
	f.Add([]byte("wavelength_air_nm,ab_mag\r\n400.5,12\r\n500,-3\r\n"))
	f.Add([]byte("wavelength_nm,flux_erg_s_cm2_a\n\"400\",1\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		table, err := ParseFluxTable("f.csv", data)
		if err != nil {
			require.Empty(t, table.VacuumNm)
			return
		}
		n := len(table.VacuumNm)
		require.GreaterOrEqual(t, n, 2)
		require.Len(t, table.Flux, n)
		mean := table.Mean(table.VacuumNm[0], table.VacuumNm[n-1])
		least, most := math.Inf(1), 0.0
		for _, v := range table.Flux {
			least, most = min(least, v), max(most, v)
		}
		require.True(t, mean >= least*(1-1e-9) && (mean <= most*(1+1e-9) || math.IsInf(mean, 1)), "%v of %v to %v", mean, least, most)
	})
}
