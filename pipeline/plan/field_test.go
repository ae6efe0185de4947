package plan_test

import (
	"context"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// How n and v follow from the target. The optical profile: 256 u; a grid of 400
// voxels of 0.5 nm and about 1 px on 640 columns leaves about 240 px to the
// field, less the tilt and smile of the slit.
func TestNumberOfElements(t *testing.T) {
	of := func(x int) *int { return &x }
	for _, c := range []struct {
		name            string
		family          string
		v, dark         *int
		mirrors         int
		wantV, wantN    int
		wantElementWide int
	}{
		{"v and dark", "m-sequence", of(127), of(16), 2, 127, 111, 222},
		{"no dark", "m-sequence", of(127), of(0), 2, 127, 127, 254},
		{"default dark, small code", "m-sequence", of(63), nil, 3, 63, 47, 141},
		{"default dark, floor((v+1)/8)", "m-sequence", of(255), nil, 1, 255, 223, 223},
		{"default dark, legendre", "legendre", of(131), nil, 1, 131, 115, 115},
		{"slit scan", "slit-scan", of(100), nil, 2, 100, 100, 200},
	} {
		t.Run(c.name, func(t *testing.T) {
			target, profile := demo(t)
			target.Code.Family, target.Code.V, target.Code.Dark, target.Code.ElementMirrors = c.family, c.v, c.dark, c.mirrors
			s, summary := build(t, target, profile)
			require.Equal(t, c.wantV, s.V)
			require.Equal(t, c.wantN, s.N())
			require.Equal(t, c.wantN, summary.Code.Elements)
			columns := s.ElementColumns()
			require.Equal(t, c.wantElementWide, s.Elements[columns[len(columns)-1]].Last-s.Elements[columns[0]].First+1)
		})
	}
}

// Without v the field is as wide as every element still keeps the whole grid,
// in every row, which is computed here again from the geometry's formula; one
// more element would not.
func TestLargestFieldKeepsTheBand(t *testing.T) {
	for _, family := range hadamard.Families() {
		for _, mirrors := range []int{1, 2, 3} {
			target, profile := demo(t)
			profile.DMD.Columns = 400 // the detector is the limit
			target.Code.Family, target.Code.V, target.Code.Dark, target.Code.ElementMirrors = string(family), nil, nil, mirrors
			s, _ := build(t, target, profile)
			require.True(t, wholeBand(profile, s.N(), mirrors), "%s of %d", family, mirrors)
			require.False(t, wholeBand(profile, s.N()+1, mirrors), "%s of %d", family, mirrors)
			code, err := hadamard.Smallest(family, s.N(), -1)
			require.NoError(t, err)
			require.Equal(t, code.V(), s.V)

			profile.DMD.Columns = 100 // the device is
			s, _ = build(t, target, profile)
			require.Equal(t, 100/mirrors, s.N())
		}
	}
}

// wholeBand tells whether the grid's voxels, edge to edge, of the first and the
// last of n elements lie on the detector in every row that mirrors light.
func wholeBand(p *instrument.Profile, n, mirrors int) bool {
	s := p.Spectrograph
	for _, j := range []int{0, n - 1} {
		for i := 0; i <= p.Grid.Count; i++ {
			l := p.Grid.FirstNM + (float64(i)-0.5)*p.Grid.StepNM - s.CenterNM
			for w := range p.DMD.Rows {
				q := s.WStepPx * (float64(w) - float64(p.DMD.Rows-1)/2)
				x := s.XCenterPx + s.UStepPx*float64(mirrors)*(float64(j)-float64(n-1)/2) +
					s.DispersionPxPerNM[0]*l + s.DispersionPxPerNM[1]*l*l + s.DispersionPxPerNM[2]*l*l*l +
					s.SlitTilt*q + s.SmilePerPx*q*q
				if x < -0.5 || x > float64(p.Detector.Columns)-0.5 {
					return false
				}
			}
		}
	}
	return true
}

// Strips lie as decided: consecutive u from ceil(u_c - (n m - 1)/2), on the
// device, off its middle by at most half a mirror.
func TestStripsAreCentred(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		target, profile := demo(t)
		v := rapid.SampledFrom([]int{7, 11, 15, 23, 31}).Draw(rt, "v")
		target.Code.Family = "m-sequence"
		if v == 11 || v == 23 {
			target.Code.Family = "legendre"
		}
		dark := rapid.IntRange(0, v-1).Draw(rt, "dark")
		target.Code.V, target.Code.Dark = &v, &dark
		target.Code.ElementMirrors = rapid.IntRange(1, 4).Draw(rt, "mirrors")
		width := (v - dark) * target.Code.ElementMirrors
		profile.DMD.Mounting = rapid.SampledFrom([]string{instrument.Square, instrument.Diagonal}).Draw(rt, "mounting")
		profile.DMD.Columns = rapid.IntRange(width, width+40).Draw(rt, "columns")
		s, _, err := plan.Build(context.Background(), target, profile)
		require.NoError(rt, err)
		first, last := profile.URange()
		columns := s.ElementColumns()
		start, end := s.Elements[columns[0]].First, s.Elements[columns[len(columns)-1]].Last
		require.Equal(rt, width, end-start+1)
		require.GreaterOrEqual(rt, start, first)
		require.LessOrEqual(rt, end, last)
		// Twice the middle of the field less twice that of the device: 0, or 1
		// where parity forbids 0.
		require.Equal(rt, (start+end)&1^(first+last)&1, start+end-first-last)
		require.Equal(rt, float64(start+end)/2, s.FieldCenterU())
	})
}

// Impossible fields, each refused with the target's key, what is wrong and a
// cure.
func TestBuildRefuses(t *testing.T) {
	of := func(x int) *int { return &x }
	for _, c := range []struct {
		name string
		edit func(target *sequence.Target, p *instrument.Profile)
		want string
	}{
		{"element wider than the device", func(target *sequence.Target, _ *instrument.Profile) { target.Code.ElementMirrors = 257 },
			"code.element_mirrors: an element of 257 mirrors is wider than the device's 256; give fewer"},
		{"field wider than the device", func(target *sequence.Target, _ *instrument.Profile) {
			target.Code.Dark = of(0)
			target.Code.V = of(255)
		},
			"code.v: 255 elements of 2 mirrors span 510 where the device has 256; "},
		{"default dark leaves nothing", func(target *sequence.Target, _ *instrument.Profile) { target.Code.Dark = nil; target.Code.V = of(15) },
			"code.v: the default of 16 dark columns leaves no element of the 15 columns; "},
		{"edge element off the detector", func(_ *sequence.Target, p *instrument.Profile) { p.Spectrograph.UStepPx = 6 },
			"code: the detector's 640 columns hold no wavelength of the grid for element 0 of 111; "},
		{"grid too long for any", func(target *sequence.Target, p *instrument.Profile) {
			target.Code.V, target.Code.Dark = nil, nil
			p.Grid.Count = 900
		}, "code.v: the wavelength grid does not fit the detector's 640 columns even for one element; "},
		{"no code is large enough", func(target *sequence.Target, _ *instrument.Profile) {
			target.Code.Family, target.Code.V, target.Code.Dark = "twin-prime", nil, of(3900)
		}, "code.dark: no twin-prime code has room for 3900 dark columns and an element; "},
		// The profile's own checks refuse these.
		{"trace tilted", func(_ *sequence.Target, p *instrument.Profile) { p.Spectrograph.TraceTilt = 0.0126 },
			"trace_tilt: a spectrum leaves its row by 8.05 rows end to end"},
		{"grid off the detector", func(_ *sequence.Target, p *instrument.Profile) { p.Spectrograph.XCenterPx = 1200 },
			"profile: grid: its wavelengths fall on columns"},
		{"sentinel off the device", func(target *sequence.Target, _ *instrument.Profile) {
			target.SentinelRows = []sequence.SentinelRow{{First: 150, Last: 160, Element: 3}}
		}, "sentinel_rows[0]: the rows 150 to 160 reach beyond the device's w of 0 to 159; "},
		{"sentinel of no element", func(target *sequence.Target, _ *instrument.Profile) {
			target.SentinelRows = []sequence.SentinelRow{{First: 150, Last: 151, Element: 111}}
		}, "sentinel_rows[0].element: there is no element 111 among the field's 0 to 110; "},
		{"sentinels overlap", func(target *sequence.Target, _ *instrument.Profile) {
			target.SentinelRows = []sequence.SentinelRow{{First: 150, Last: 152, Element: 1}, {First: 152, Last: 153, Element: 1}}
		}, "sentinel_rows[1]: the rows 152 to 153 overlap those of sentinel_rows[0]; "},
		{"closed negative", func(target *sequence.Target, _ *instrument.Profile) {
			target.Closed = []sequence.ClosedRow{{First: -3, Last: 4}}
		}, "closed[0]: the rows -3 to 4 reach beyond"},
		{"closed sentinel", func(target *sequence.Target, _ *instrument.Profile) {
			target.SentinelRows = []sequence.SentinelRow{{First: 150, Last: 152, Element: 1}}
			target.Closed = []sequence.ClosedRow{{First: 152, Last: 159}}
		}, "closed[0]: the rows 152 to 159 overlap those of sentinel_rows[0]; "},
		{"closed sentinel's element", func(target *sequence.Target, _ *instrument.Profile) {
			target.SentinelRows = []sequence.SentinelRow{{First: 150, Last: 152, Element: 1}}
			target.Closed = []sequence.ClosedRow{{First: 152, Last: 159, Element: of(1)}}
		}, "closed[0]: the rows 152 to 159 overlap those of sentinel_rows[0]; "},
		{"all closed", func(target *sequence.Target, _ *instrument.Profile) {
			target.Closed = []sequence.ClosedRow{{First: 0, Last: 159}}
		}, "closed: no open mirror row falls on the detector; "},
		{"too many exposures", func(target *sequence.Target, _ *instrument.Profile) { target.Code.Cycles = 200 },
			"code.cycles: the target asks for"},
		{"unchecked target", func(target *sequence.Target, _ *instrument.Profile) { target.DwellSeconds = -1 },
			"dwell_s: -1 is not above 0; "},
	} {
		t.Run(c.name, func(t *testing.T) {
			target, profile := demo(t)
			c.edit(target, profile)
			s, summary, err := plan.Build(context.Background(), target, profile)
			require.ErrorContains(t, err, c.want)
			require.Contains(t, err.Error(), "; ")
			require.NotContains(t, err.Error(), "\n")
			require.Nil(t, s)
			require.Nil(t, summary)
			var e *config.Error
			require.ErrorAs(t, err, &e)
		})
	}
}

func TestWarnings(t *testing.T) {
	of := func(x int) *int { return &x }
	for _, c := range []struct {
		name string
		edit func(target *sequence.Target, p *instrument.Profile)
		want string
	}{
		{"few dark columns", func(target *sequence.Target, _ *instrument.Profile) { target.Code.Dark = of(13) },
			"13 dark columns are fewer than 2 log2 v = 14: the order audit, the throughput correction and repairs are off"},
		{"few dark columns a step", func(target *sequence.Target, _ *instrument.Profile) {
			target.Code.Family, target.Code.V, target.Code.Dark = "singer", of(73), nil
		}, "a step opens 2.0 of them in the mean; give code.dark 41 or more"},
		{"band cut", func(_ *sequence.Target, p *instrument.Profile) { p.Spectrograph.XCenterPx = 200 },
			"element 0 of 111 has"},
		{"no all-off", func(target *sequence.Target, _ *instrument.Profile) { target.AllOffEvery = 0 }, "no all-off frame is planned"},
		{"no bias", func(target *sequence.Target, _ *instrument.Profile) { target.Calibration.Bias.Count = 0 }, "no bias frame is planned"},
		{"no dark", func(target *sequence.Target, _ *instrument.Profile) { target.Calibration.Dark.Count = 0 }, "no dark frame is planned"},
		{"no flat", func(target *sequence.Target, _ *instrument.Profile) { target.Calibration.Flat = sequence.FlatFrames{} }, "no flat is planned"},
		{"no arc", func(target *sequence.Target, _ *instrument.Profile) { target.Calibration.Arc.Count = 0 }, "no arc is planned: wavelengths will be nominal"},
		{"low", func(target *sequence.Target, _ *instrument.Profile) { target.DecDeg = -34 }, "the field's airmass reaches"},
		{"below the horizon", func(target *sequence.Target, _ *instrument.Profile) { target.RADeg += 180 }, "the field is below the horizon"},
		{"corner of the device", func(target *sequence.Target, p *instrument.Profile) {
			p.DMD.Mounting, p.DMD.Columns, p.DMD.Rows = instrument.Diagonal, 130, 130
		}, "the device's corner cuts its strip"},
	} {
		t.Run(c.name, func(t *testing.T) {
			target, profile := demo(t)
			c.edit(target, profile)
			_, summary := build(t, target, profile)
			found := 0
			for _, w := range summary.Warnings {
				if strings.Contains(w, c.want) {
					found++
				}
			}
			require.Positive(t, found, summary.Warnings)
		})
	}
}

// A field beside the device's middle: its strips by as many u, as many elements as still keep
// the grid on the detector, and refusals that name the key and a cure that works.
func TestFieldBeside(t *testing.T) {
	of := func(x int) *int { return &x }
	beside := func(offset int, v, dark *int) (*sequence.Target, *instrument.Profile) {
		target, profile := demo(t)
		target.Code.V, target.Code.Dark, target.Field = v, dark, &sequence.FieldChoice{OffsetU: offset}
		return target, profile
	}
	firstOf := func(s *sequence.Sequence) int { return s.Elements[s.ElementColumns()[0]].First }
	target, profile := beside(0, of(127), of(16)) // 222 of 256 mirrors
	centred, _ := build(t, target, profile)
	for _, offset := range []int{-17, 5, 17} {
		target.Field.OffsetU = offset
		s, _ := build(t, target, profile)
		require.Equal(t, firstOf(centred)+offset, firstOf(s))
		require.InDelta(t, float64(offset), s.FieldCenterU()-profile.UCenter(), 1e-12)
		require.Equal(t, offset, s.Target.OffsetU())
	}
	for _, c := range []struct {
		offset int
		want   string
	}{
		{18, "field.offset_u: a field of 111 elements of 2 mirrors would span u from 35 to 256 where the device has 0 to 255; give an offset from -17 to 17, or a smaller field"},
		{-18, "give an offset from -17 to 17"},
	} {
		target.Field.OffsetU = c.offset
		_, _, err := plan.Build(context.Background(), target, profile)
		require.ErrorContains(t, err, c.want)
	}

	// Left to plan, the field loses at one side what it gains at the other: every mirror of
	// offset takes two.
	target, profile = beside(0, nil, nil)
	whole, _ := build(t, target, profile)
	target.Field.OffsetU = 20
	s, _ := build(t, target, profile)
	require.Equal(t, whole.N()-20, s.N(), "elements of two mirrors")
	profile.Spectrograph.XCenterPx -= 20 * profile.Spectrograph.UStepPx
	s, _ = build(t, target, profile)
	require.Equal(t, min(whole.N(), (256-40)/2), s.N(), "the detector is moved, the device is the limit")

	// Beyond the detector.
	target, profile = beside(-900, of(31), of(7))
	profile.DMD.Columns = 2200
	_, _, err := plan.Build(context.Background(), target, profile)
	require.ErrorContains(t, err, "field.offset_u: the detector's 640 columns hold no wavelength of the grid for element")

	// Mounted diagonally, strips near the corner have no mirror in the rows in use.
	target, profile = beside(120, of(31), of(7))
	profile.DMD.Mounting = instrument.Diagonal
	profile.DMD.Columns, profile.DMD.Rows = 160, 160
	target.Field.Rows = []int{60, 90}
	_, _, err = plan.Build(context.Background(), target, profile)
	require.ErrorContains(t, err, "has no mirror in the rows that are open")
	target.Field.Rows = []int{-200, 90}
	_, _, err = plan.Build(context.Background(), target, profile)
	require.ErrorContains(t, err, "field.rows: the rows -200 to 90 reach beyond the device's w of -159 to 159")
}

// field.rows becomes closed rows, with no row of two uses.
func TestFieldRows(t *testing.T) {
	target, profile := demo(t)
	target.Field = &sequence.FieldChoice{Rows: []int{30, 90}}
	target.SentinelRows = []sequence.SentinelRow{{First: 100, Last: 110, Element: 3}}
	element := 7
	target.Closed = []sequence.ClosedRow{{First: 85, Last: 95}, {First: 5, Last: 40, Element: &element}}
	s, _ := build(t, target, profile)
	last := profile.DMD.Rows - 1
	require.Equal(t, []sequence.RowRange{
		{First: 0, Last: 29, Use: sequence.UseClosed, Element: -1},
		{First: 30, Last: 84, Use: sequence.UseCoded, Element: -1},
		{First: 85, Last: 95, Use: sequence.UseClosed, Element: -1},
		{First: 96, Last: 99, Use: sequence.UseClosed, Element: -1},
		{First: 100, Last: 110, Use: sequence.UseSentinel, Element: 3},
		{First: 111, Last: last, Use: sequence.UseClosed, Element: -1},
		{First: 5, Last: 40, Use: sequence.UseClosed, Element: 7},
	}, s.Rows)
	require.Empty(t, s.Target.Field.Rows)
	again, _ := build(t, s.Target, profile)
	require.Equal(t, s.Rows, again.Rows, "the resolved target plans the same")
}
