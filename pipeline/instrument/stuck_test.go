package instrument

import (
	"io/fs"
	"os"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestStuck(t *testing.T) {
	p, err := parsePlain(plain)
	require.NoError(t, err)
	require.Equal(t, []StuckMirror{{Column: 0, Row: 29, On: true}, {Column: 39, Row: 0}}, p.Stuck())
	require.Equal(t, map[string][]byte{"stuck.csv": []byte(plainStuck)}, p.Files())
}

func TestStuckRefuses(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"", "stuck.csv:1: the file is empty; write the line column,row,state and a line a mirror"},
		{"0,0,on\n", "stuck.csv:1: the first line is not column,row,state; write it"},
		{"column,row\n", "stuck.csv:1: not CSV of three fields (wrong number of fields); write column,row,state"},
		{"column,row,state\n1,2\n", "stuck.csv:2: not CSV of three fields (wrong number of fields); write column,row,state"},
		{"column,row,state\n1,\"2,on\n", "stuck.csv:2: not CSV of three fields (extraneous or missing \" in quoted-field); write column,row,state"},
		{"column,row,state\n40,0,on\n", `stuck.csv:2: column "40" is no whole number from 0 to 39; give the device's own column`},
		{"column,row,state\n1.5,0,on\n", `stuck.csv:2: column "1.5" is no whole number from 0 to 39; give the device's own column`},
		{"column,row,state\n0,-1,on\n", `stuck.csv:2: row "-1" is no whole number from 0 to 29; give the device's own row`},
		{"column,row,state\n0,1,ON\n", `stuck.csv:2: state "ON" is unknown; write on or off`},
		{"column,row,state\n0,1,on\n2,1,on\n0,1,off\n", "stuck.csv:4: mirror 0,1 stands here a second time, first on line 2; delete one of them"},
	} {
		p, err := Parse("p.yaml", []byte(plain), besideStuck(c.text))
		require.EqualError(t, err, c.want)
		require.Nil(t, p)
	}
	_, err := Parse("p.yaml", []byte(plain), nil)
	require.EqualError(t, err, "p.yaml:23: dmd.stuck_csv: a profile read from memory can name no file; leave the key out")
	_, err = Parse("p.yaml", []byte(plain), func(string) ([]byte, error) { return nil, os.ErrNotExist })
	require.ErrorIs(t, err, fs.ErrNotExist)
}

func FuzzStuck(f *testing.F) {
	f.Add([]byte(plainStuck))
	f.Add([]byte("column,row,state\r\n\"1\",2,off\r\n"))
	f.Add([]byte("column,row,state\n1,\"2\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		list, err := parseStuck("s.csv", data, 40, 30)
		if err != nil && list != nil {
			t.Fatal("an error with a result")
		}
		for _, m := range list {
			if m.Column < 0 || m.Column >= 40 || m.Row < 0 || m.Row >= 30 {
				t.Fatalf("mirror %v outside the device", m)
			}
		}
	})
}
