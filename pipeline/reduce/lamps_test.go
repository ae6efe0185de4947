package reduce

import (
	"math"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/configs"
)

// Wavelengths in air and in vacuum as published: neon of Sansonetti, Blackwell and
// Saloman (2004, J. Res. NIST 109, 371), their vacuum wavelengths by Peck and Reeder
// (1972) as on a public page of an aeronomy institute; the others by the differences
// of level energies in NIST's Atomic Spectra Database (hc = 1239.841984 eV nm), good
// to 1.5e-4 nm.
var publishedLines = []struct {
	element              string
	air, vacuum, withinN float64
}{
	{"Ne", 841.71597, 841.94727, 1e-5},
	{"Ne", 841.84269, 842.07402, 1e-5},
	{"Ne", 846.33565, 846.56820, 1e-5},
	{"Ne", 848.44432, 848.67744, 1e-5},
	{"Ne", 849.53595, 849.76937, 1e-5},
	{"Ne", 854.46953, 854.70428, 1e-5},
	{"Ne", 857.13528, 857.37075, 1e-5},
	{"Ne", 858.29031, 858.52609, 1e-5},
	{"Ne", 859.12585, 859.36186, 1e-5},
	{"Ne", 863.46471, 863.70189, 1e-5},
	{"Ne", 863.53177, 863.76897, 1e-5},
	{"Ne", 864.70412, 864.94164, 1e-5},
	{"Ne", 865.43828, 865.67600, 1e-5},
	{"Ne", 865.55220, 865.78995, 1e-5},
	{"Ne", 867.94936, 868.18776, 1e-5},
	{"Ne", 868.19208, 868.43054, 1e-5},
	{"Ne", 870.41122, 870.65028, 1e-5},
	{"Ne", 876.75360, 876.99438, 1e-5},
	{"Ne", 585.24878, 585.41102, 1.5e-4},
	{"Ne", 640.22480, 640.40170, 1.5e-4},
	{"Ne", 703.24128, 703.43524, 1.5e-4},
	{"Ne", 753.57739, 753.78491, 1.5e-4},
	{"Hg", 404.65650, 404.77075, 1.5e-4},
	{"Hg", 546.07500, 546.22673, 1.5e-4},
	{"Ar", 763.51060, 763.72072, 1.5e-4},
}

func TestLampWavelengths(t *testing.T) {
	for _, p := range publishedLines {
		lines, err := lampLines(p.element, p.vacuum-2e-4, p.vacuum+2e-4)
		require.NoError(t, err)
		require.Len(t, lines, 1, "%s %.5f", p.element, p.vacuum)
		require.InDelta(t, p.vacuum, lines[0].VacuumNM, p.withinN+5e-6, "%s %.5f", p.element, p.air)
	}
}

// Air wavelengths that circulate in older lists and are wrong (compared with NIST's
// Atomic Spectra Database): no line of ours is one of them.
func TestLampListsAvoidOldErrors(t *testing.T) {
	for _, name := range lampLists {
		data, err := configs.ReadFile(lampFolder, name)
		require.NoError(t, err)
		for _, wrong := range []string{"626.65085", "633.44304", "640.2231", "671.70456", "965.7784", "978.5403", "501.56210", "837.7608"} {
			require.NotContains(t, string(data), ","+wrong+",")
			require.NotContains(t, string(data), ","+wrong+"0,")
		}
	}
}

func TestLampLines(t *testing.T) {
	lines, err := lampLines("HgHeNe", 480, 680)
	require.NoError(t, err)
	require.True(t, slices.IsSortedFunc(lines, func(a, b calib.LampLine) int { return int(math.Copysign(1, a.VacuumNM-b.VacuumNM)) }))
	brightest := 0
	for _, l := range lines {
		require.True(t, l.VacuumNM > 480 && l.VacuumNM < 680 && l.Intensity > 0 && l.Intensity <= 1)
		if l.Intensity == 1 {
			brightest++
		}
	}
	// One of each gas, and a second one of neon as bright (585 and 640 nm).
	require.Equal(t, 4, brightest)
	infrared, err := lampLines("KrXe", 1480, 1720)
	require.NoError(t, err)
	require.Len(t, infrared, 22)
	none, err := lampLines("Hg", 1480, 1720)
	require.NoError(t, err)
	require.Empty(t, none)
	for _, lamp := range []string{"", "halogen", "Neon", "NeNe", "He Ne", "ne"} {
		_, err := lampLines(lamp, 400, 700)
		require.ErrorContains(t, err, "name it by the symbols of Hg, Ne, Ar, Kr, Xe, He", lamp)
	}
}

func TestParseLampListRefuses(t *testing.T) {
	head := strings.Join(lampColumns, ",") + "\n"
	for _, c := range []struct{ text, want string }{
		{"", "the first line must name"},
		{"element,ion\n", "the first line must name"},
		{head + "Ne,I,585.2,585.4\n", "wrong number of fields"},
		{head + "Ne,I,585.24878,585.41102,1,x\nNe,I,585.24878,585.24878,1,x\n", "line 3 is no lamp line"}, // vacuum left in air
		{head + "Ne,I,585.24878,nan,1,x\n", "line 2 is no lamp line"},
		{head + "Ne,I,585.24878,585.41102,0,x\n", "line 2 is no lamp line"},
		{head + "Ne,I,585.24878,585.41102,Inf,x\n", "line 2 is no lamp line"},
		{head + ",I,585.24878,585.41102,1,x\n", "line 2 is no lamp line"},
	} {
		_, err := parseLampList("list.csv", []byte(c.text))
		require.ErrorContains(t, err, c.want)
		require.ErrorContains(t, err, "list.csv")
	}
}

func FuzzParseLampList(f *testing.F) {
	for _, name := range lampLists {
		data, err := configs.ReadFile(lampFolder, name)
		require.NoError(f, err)
		f.Add(data[:len(data)/20])
	}
	f.Add([]byte(strings.Join(lampColumns, ",") + "\nNe,I,585.24878,585.41102,1,\"a \"\"b\"\"\"\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		lines, err := parseLampList("fuzz", data)
		if err != nil {
			require.Nil(t, lines)
			return
		}
		for _, l := range lines {
			require.True(t, l.vacuumNM > 0 && l.strength > 0 && l.element != "")
		}
	})
}
