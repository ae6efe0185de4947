package reduce

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
)

var wantMonitor = []monitorRow{{3, 1.5, 0.01}, {7, 0.25, 1e-3}}

func TestMonitorCSV(t *testing.T) {
	path := filepath.Join(t.TempDir(), "m.csv")
	require.NoError(t, os.WriteFile(path, []byte("step,flux,error\n3,1.5,0.01\n7,0.25,1e-3\n"), 0o644))
	rows, err := readMonitor(path)
	require.NoError(t, err)
	require.Equal(t, wantMonitor, rows)
}

// The columns of a FITS table may be of any number type and in any order.
func TestMonitorTable(t *testing.T) {
	path := filepath.Join(t.TempDir(), "m.fits")
	write := func(columns ...fitsutil.Column) {
		require.NoError(t, fitsutil.WriteFile(path, nil, &fitsutil.Table{Name: "MONITOR", Columns: columns}))
	}
	flux := fitsutil.Column{Name: "FLUX", Format: "E", Data: []float32{1.5, 0.25}}
	sigma := fitsutil.Column{Name: "ERROR", Format: "D", Data: []float64{0.01, 1e-3}}
	step := fitsutil.Column{Name: "STEP", Format: "J", Data: []int32{3, 7}}
	write(flux, sigma, step)
	rows, err := readMonitor(path)
	require.NoError(t, err)
	require.Equal(t, wantMonitor, rows)
	write(flux, sigma)
	_, err = readMonitor(path)
	require.ErrorIs(t, err, fitsutil.ErrMissingColumn)
	write(flux, sigma, fitsutil.Column{Name: "STEP", Format: "4A", Data: []string{"3", "7"}})
	_, err = readMonitor(path)
	require.ErrorContains(t, err, "column STEP holds no single number")
	write(flux, sigma, fitsutil.Column{Name: "STEP", Format: "D", Data: []float64{3, 7.5}})
	_, err = readMonitor(path)
	require.ErrorContains(t, err, "row 2, column step: 7.5")
	require.NoError(t, fitsutil.WriteFile(path, nil, &fitsutil.ImageData{Axes: []int{2, 2}, Data: make([]float32, 4)}))
	_, err = readMonitor(path)
	require.ErrorContains(t, err, "no binary table")
}

func TestMonitorRefusals(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"", "no line of column names"},
		{"step,flux\n1,2\n", "wrong number of fields"},
		{"step,counts,error\n1,2,3\n", `the columns are "step,counts,error"`},
		{"step,flux,error\n1,1,0.1\n", "1 rows tell no change"},
		{"step,flux,error\n1,1,0.1\n1,1,0.1\n", "step 1 comes twice"},
		{"step,flux,error\n1.5,1,0.1\n", `line 2, column step: "1.5"`},
		{"step,flux,error\n0,1,0.1\n", "0 is no step"},
		{"step,flux,error\n1,x,0.1\n", `column flux: "x"`},
		{"step,flux,error\n1,-1,0.1\n", "-1 is no flux"},
		{"step,flux,error\n1,nan,0.1\n", "NaN is no flux"},
		{"step,flux,error\n1,1,0\n", "0 is no standard error"},
		{"step,flux,error\n1,1,inf\n", "+Inf is no standard error"},
	} {
		_, err := parseMonitor(strings.NewReader(c.text))
		require.ErrorContains(t, err, c.want, c.text)
	}
	_, err := readMonitor(filepath.Join(t.TempDir(), "gone.csv"))
	require.ErrorIs(t, err, os.ErrNotExist)
}

// What is read is sound; what is not gives no rows.
func FuzzMonitor(f *testing.F) {
	for _, s := range []string{"step,flux,error\n3,1.5,0.01\n7,0.25,1e-3\n", "step,flux,error\n\"3\",0x1p-2,1_0\n4,1,1\n", "", "step,flux,error\n1,1e999,1\n"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		rows, err := parseMonitor(strings.NewReader(text))
		if err != nil {
			return
		}
		require.GreaterOrEqual(t, len(rows), 2)
		for _, r := range rows {
			require.NoError(t, r.check())
		}
	})
}
