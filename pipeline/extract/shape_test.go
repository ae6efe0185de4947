package extract

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// testSky is a field whose voxels are 0.6 x 0.3 arcsec, turned by an angle.
func testSky(turnDeg float64) *sky {
	sin, cos := math.Sincos(turnDeg * math.Pi / 180)
	c1, c2 := 0.6/arcsecPerDeg, 0.3/arcsecPerDeg
	return &sky{raDeg: 123.3, decDeg: 21.6, refX: 20, refY: 40, cd: [2][2]float64{{-c1 * cos, c2 * sin}, {c1 * sin, c2 * cos}}}
}

func totalArea(cells []cell) float64 {
	sum := 0.0
	for _, c := range cells {
		sum += c.area
	}
	return sum
}

// The cells of a circle or an ellipse add up to its area, wherever it lies and
// however it is turned.
func TestCellsHaveTheShapesArea(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		k := testSky(rapid.Float64Range(0, 360).Draw(t, "turn"))
		s := &Shape{
			Form: Ellipse, InVoxels: true, Points: [][2]float64{{rapid.Float64Range(15, 25).Draw(t, "x"), rapid.Float64Range(30, 50).Draw(t, "y")}},
			MajorArcsec: rapid.Float64Range(0.05, 6).Draw(t, "a"), MinorArcsec: rapid.Float64Range(0.05, 6).Draw(t, "b"), PADeg: rapid.Float64Range(0, 180).Draw(t, "pa"),
		}
		cells, err := s.cells(k, 41, 81)
		require.NoError(t, err)
		want := math.Pi * s.MajorArcsec * s.MinorArcsec / (0.6 * 0.3)
		require.InDelta(t, want, totalArea(cells), 1e-4*want+1e-4)
	})
}

// A position angle leads from north through east: an ellipse along 90 degrees is
// long in right ascension.
func TestPositionAngle(t *testing.T) {
	s, err := ParseEllipse("20 40 6 0.5 90", true)
	require.NoError(t, err)
	outline, err := s.outline(testSky(0))
	require.NoError(t, err)
	width, height := 0.0, 0.0
	for _, p := range outline {
		width, height = max(width, math.Abs(p[0]-20)*0.6), max(height, math.Abs(p[1]-40)*0.3)
	}
	require.InDelta(t, 6, width, 0.01)
	require.InDelta(t, 0.5, height, 0.01)
	s.PADeg = 45 // to the north-east: rows up, elements down
	outline, err = s.outline(testSky(0))
	require.NoError(t, err)
	require.Less(t, outline[0][0], 20.0)
	require.Greater(t, outline[0][1], 40.0)
}

// A polygon that is not convex: an L of three voxels.
func TestConcavePolygon(t *testing.T) {
	s, err := ParsePolygon("3.5 4.5 5.5 4.5 5.5 5.5 4.5 5.5 4.5 6.5 3.5 6.5", true)
	require.NoError(t, err)
	cells, err := s.cells(testSky(0), 41, 81)
	require.NoError(t, err)
	require.Len(t, cells, 3)
	for i, want := range []cell{{element: 4, row: 5}, {element: 5, row: 5}, {element: 4, row: 6}} {
		require.Equal(t, want.element, cells[i].element)
		require.Equal(t, want.row, cells[i].row)
		require.InDelta(t, 1, cells[i].area, 1e-9)
	}
}

func TestSkyReadsBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		k := testSky(rapid.Float64Range(0, 360).Draw(t, "turn"))
		x, y := rapid.Float64Range(-100, 100).Draw(t, "x"), rapid.Float64Range(-100, 100).Draw(t, "y")
		xi, eta, err := k.plane(k.position(x, y))
		require.NoError(t, err)
		gotX, gotY := k.voxel(xi, eta)
		require.InDelta(t, x, gotX, 1e-6)
		require.InDelta(t, y, gotY, 1e-6)
	})
}

func TestShapesRefused(t *testing.T) {
	k := testSky(0)
	for name, make := range map[string]func() (*Shape, error){
		"few":      func() (*Shape, error) { return ParseCircle("123.3 21.6", false) },
		"radius":   func() (*Shape, error) { return ParseCircle("123.3 21.6 -1", false) },
		"nan":      func() (*Shape, error) { return ParseCircle("123.3 21.6 nan", false) },
		"corners":  func() (*Shape, error) { return ParsePolygon("1 2 3 4", true) },
		"odd":      func() (*Shape, error) { return ParsePolygon("1 2 3 4 5 6 7", true) },
		"range":    func() (*Shape, error) { return ParseVoxels("7-3", "1") },
		"sign":     func() (*Shape, error) { return ParseVoxels("-3", "1") },
		"far":      func() (*Shape, error) { return ParseCircle("303.3 -21.6 2", false) },
		"outside":  func() (*Shape, error) { return ParseCircle("123.4 21.6 2", false) },
		"crossing": func() (*Shape, error) { return ParsePolygon("2 2 8 8 8 2 2 8", true) },
		"too high": func() (*Shape, error) { return ParseVoxels("1-3", "80-81") },
	} {
		s, err := make()
		if err == nil {
			_, err = s.cells(k, 41, 81)
		}
		require.Error(t, err, name)
	}
}

func FuzzParseShape(f *testing.F) {
	f.Add("123.3 21.6 2")
	f.Add("8h13m12s -21:36:00 2 1 30")
	f.Add("1 2 3 4 5 6")
	f.Add("3-7,9")
	f.Fuzz(func(t *testing.T, s string) {
		for _, inVoxels := range []bool{false, true} {
			for _, parse := range []func(string, bool) (*Shape, error){ParseCircle, ParseEllipse, ParsePolygon} {
				shape, err := parse(s, inVoxels)
				if err != nil {
					continue
				}
				cells, err := shape.cells(testSky(30), 41, 81)
				for _, c := range cells {
					if !(c.area > 0 && c.area <= 1) || c.element < 0 || c.element > 40 || c.row < 0 || c.row > 80 || err != nil {
						t.Fatal(s, c, err)
					}
				}
			}
		}
		if shape, err := ParseVoxels(s, s); err == nil && (len(shape.Elements) == 0 || len(shape.Rows) == 0) {
			t.Fatal(s)
		}
	})
}
