package instrument

import (
	"encoding/json"
	"fmt"
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/config"
)

// TestRanges: u and w of every mirror, counted one by one.
func TestRanges(t *testing.T) {
	for columns := 1; columns <= 7; columns++ {
		for rows := 1; rows <= 7; rows++ {
			for _, mounting := range []string{Square, Diagonal} {
				p := &Profile{DMD: DMD{Columns: columns, Rows: rows, Mounting: mounting}}
				u0, u1, w0, w1 := math.MaxInt, math.MinInt, math.MaxInt, math.MinInt
				for c := range columns {
					for r := range rows {
						u, w := c, r
						if mounting == Diagonal {
							u, w = c+r, r-c
							require.Equal(t, u&1, w&1, "u and w have one parity")
						}
						u0, u1, w0, w1 = min(u0, u), max(u1, u), min(w0, w), max(w1, w)
					}
				}
				first, last := p.URange()
				require.Equal(t, [2]int{u0, u1}, [2]int{first, last})
				first, last = p.WRange()
				require.Equal(t, [2]int{w0, w1}, [2]int{first, last})
				require.Equal(t, float64(u0+u1)/2, p.UCenter())
				require.Equal(t, float64(w0+w1)/2, p.WCenter())
			}
		}
	}
}

// TestScales: worked by hand.
func TestScales(t *testing.T) {
	p := &Profile{
		DMD:          DMD{ArcsecPerMirror: 0.36, Mounting: Square},
		Spectrograph: Spectrograph{WStepPx: 2, UStepPx: 1.5},
		Telescope:    Telescope{DiameterM: 2, ObscuredFraction: 0.25},
	}
	require.InDelta(t, 0.36, p.ArcsecPerU(), 1e-15)
	c1, c2 := p.VoxelDeg(3)
	require.InEpsilon(t, 3e-4, c1, 1e-14)   // 3 mirrors of 1e-4 degrees
	require.InEpsilon(t, 0.5e-4, c2, 1e-14) // 2 rows a mirror
	require.InEpsilon(t, 4.5, p.ElementStepPx(3), 1e-14)
	require.InEpsilon(t, 0.75*math.Pi, p.CollectingAreaM2(), 1e-14)
	p.DMD.Mounting = Diagonal
	// Seen along u, a mirror turned by 45 degrees repeats every side/sqrt 2.
	require.InEpsilon(t, 0.36*math.Cos(math.Pi/4), p.ArcsecPerU(), 1e-14)

	g := Grid{FirstNM: 480, StepNM: 0.5, Count: 401}
	require.Equal(t, 680.0, g.LastNM())
	require.Equal(t, 479.75, g.WavelengthNM(-0.5))
}

func TestCurveEnds(t *testing.T) {
	c := Curve{{400, 0.2}, {500, 0.4}, {600, 0}}
	for _, row := range []struct{ at, want float64 }{
		{399.999, 0}, {400, 0.2}, {450, 0.3}, {500, 0.4}, {550, 0.2}, {600, 0}, {600.1, 0}, {math.NaN(), 0},
	} {
		require.InDelta(t, row.want, c.At(row.at), 1e-15, "%v", row.at)
	}
	require.Zero(t, Curve{}.At(500))
	k := Contrast{{400, 3000}, {600, 2000}}
	for _, row := range []struct{ at, want float64 }{{100, 3000}, {400, 3000}, {500, 2500}, {600, 2000}, {900, 2000}} {
		require.InDelta(t, row.want, k.At(row.at), 1e-9, "%v", row.at)
	}
	require.Equal(t, 1500.0, Contrast{{500, 1500}}.At(100))
	require.Zero(t, Contrast{}.At(500))
	p := &Profile{Telescope: Telescope{Throughput: c}, Spectrograph: Spectrograph{Throughput: Curve{{300, 1}, {500, 0.5}}}}
	require.InEpsilon(t, 0.4*0.5, p.Throughput(500), 1e-14)
}

// TestCrosscheckInterpolation: numpy.interp on the tables of the embedded
// profiles, 0 beyond a throughput and constant beyond the contrast.
func TestCrosscheckInterpolation(t *testing.T) {
	type query struct {
		X, Y, At    []float64
		Zero        bool
		Ours        []float64 `json:"-"`
		Description string    `json:"-"`
	}
	var queries []query
	for _, name := range Names() {
		p, err := Load(name)
		require.NoError(t, err)
		for _, c := range []Curve{p.Telescope.Throughput, p.Spectrograph.Throughput} {
			q := query{Zero: true, Description: name}
			for _, point := range c {
				q.X, q.Y = append(q.X, point.WavelengthNM), append(q.Y, point.Fraction)
			}
			for at := c[0].WavelengthNM - 20; at < c[len(c)-1].WavelengthNM+20; at += 3.7 {
				q.At, q.Ours = append(q.At, at), append(q.Ours, c.At(at))
			}
			queries = append(queries, q)
		}
		q := query{Description: name + " contrast"}
		for _, point := range p.DMD.Contrast {
			q.X, q.Y = append(q.X, point.WavelengthNM), append(q.Y, point.Ratio)
		}
		for at := 300.0; at < 2000; at += 13.7 {
			q.At, q.Ours = append(q.At, at), append(q.Ours, p.DMD.Contrast.At(at))
		}
		queries = append(queries, q)
	}
	input, err := json.Marshal(queries)
	require.NoError(t, err)
	var theirs [][]float64
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "instrument_interp.py", string(input))), &theirs))
	require.Len(t, theirs, len(queries))
	for i, q := range queries {
		require.InDeltaSlice(t, theirs[i], q.Ours, 1e-12*(1+q.Y[0]), q.Description)
	}
}

// TestActive: random tilings with overscan between and around the sections;
// the place of every raw pixel is found by striking out, one by one, the raw
// columns and rows that no data section covers.
func TestActive(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		xs := cuts(t, "x")
		ys := cuts(t, "y")
		d := Detector{}
		for _, y := range ys {
			for _, x := range xs {
				d.Amplifiers = append(d.Amplifiers, Amplifier{Data: Section{x[0], x[1], y[0], y[1]}, GainEPerADU: 1, ReadNoiseE: 1})
			}
		}
		activeX, activeY := struck(xs), struck(ys)
		d.Columns, d.Rows = len(activeX), len(activeY)
		for i, place := range d.Active() {
			s := d.Amplifiers[i].Data
			require.Equal(t, s, place.Raw)
			for x := s[0]; x <= s[1]; x++ {
				require.Equal(t, activeX[x], place.X0+x-s[0])
			}
			for y := s[2]; y <= s[3]; y++ {
				require.Equal(t, activeY[y], place.Y0+y-s[2])
			}
		}
		require.Equal(t, xs[len(xs)-1][1], d.RawColumns())
		require.Equal(t, ys[len(ys)-1][1], d.RawRows())
		p := Profile{Detector: d}
		require.NoError(t, p.checksOfTiling())
		p.Detector.Columns++
		require.ErrorContains(t, p.checksOfTiling(), "give sections that tile it")
	})
}

// checksOfTiling runs the one check.
func (p *Profile) checksOfTiling() error {
	c := (*config.Doc)(nil).Checks()
	p.Detector.checkTiling(c)
	return c.Err()
}

// cuts draws one to three ranges, ascending, with gaps of 0 to 4 before each.
func cuts(t *rapid.T, name string) (ranges [][2]int) {
	next := 1
	for i := range rapid.IntRange(1, 3).Draw(t, name+"s") {
		first := next + rapid.IntRange(0, 4).Draw(t, fmt.Sprint(name, " gap ", i))
		next = first + rapid.IntRange(1, 9).Draw(t, fmt.Sprint(name, " width ", i))
		ranges = append(ranges, [2]int{first, next - 1})
	}
	return ranges
}

// struck numbers from 0 the positions that some range covers.
func struck(ranges [][2]int) map[int]int {
	number := make(map[int]int)
	for _, r := range ranges {
		for at := r[0]; at <= r[1]; at++ {
			number[at] = len(number)
		}
	}
	return number
}

func TestSections(t *testing.T) {
	p, err := Load("optical")
	require.NoError(t, err)
	require.Equal(t, 672, p.Detector.RawColumns())
	require.Equal(t, 192, p.Detector.RawRows())
	require.Equal(t, []Placement{{Section{1, 320, 1, 192}, 0, 0}, {Section{321, 640, 1, 192}, 320, 0}}, p.Detector.Active())
	s, ok := p.Detector.Amplifiers[1].Overscan.Section()
	require.True(t, ok)
	require.Equal(t, 16, s.Width())
	require.Equal(t, 192, s.Height())
	x0, x1, y0, y1 := s.Bounds0()
	require.Equal(t, []int{656, 672, 0, 192}, []int{x0, x1, y0, y1})
	p, err = Load("infrared")
	require.NoError(t, err)
	_, ok = p.Detector.Amplifiers[0].Overscan.Section()
	require.False(t, ok)
	require.Equal(t, 512, p.Detector.RawColumns())

	plainProfile, err := parsePlain(plain)
	require.NoError(t, err)
	require.Equal(t, []Placement{{Section{1, 50, 1, 40}, 0, 0}, {Section{61, 110, 1, 40}, 50, 0}}, plainProfile.Detector.Active())
	// Two rows of amplifiers, the upper pair's overscan in the middle of the frame.
	four := strings.NewReplacer("rows: 40\n  amplifiers:\n", "rows: 80\n  amplifiers:\n", "y_center_px: 19.5", "y_center_px: 39.5", "  dark_e_per_s", `    - data: [1, 50, 45, 84]
      overscan: [51, 55, 45, 84]
      gain_e_per_adu: 1
      read_noise_e: 4
      bias_adu: 900
    - data: [61, 110, 45, 84]
      gain_e_per_adu: 1
      read_noise_e: 4
      bias_adu: 900
  dark_e_per_s`).Replace(plain)
	mosaic, err := parsePlain(four)
	require.NoError(t, err)
	require.Equal(t, Placement{Section{61, 110, 45, 84}, 50, 40}, mosaic.Detector.Active()[3])
	require.Equal(t, 84, mosaic.Detector.RawRows())
}

// Between exposures the detector is read and, where the profile says so, the next mask is
// loaded.
func TestOverhead(t *testing.T) {
	p, err := Load("optical")
	require.NoError(t, err)
	require.Equal(t, 4.0, p.OverheadS())
	text, err := p.YAML()
	require.NoError(t, err)
	require.NotContains(t, string(text), "load_s", "profiles without the key keep their text")
	loads := 0.25
	p.DMD.LoadS = &loads
	require.NoError(t, p.Validate())
	require.Equal(t, 4.25, p.OverheadS())
	loads = -1
	require.ErrorContains(t, p.Validate(), "dmd.load_s: -1 is below 0; give a number not below 0")
}
