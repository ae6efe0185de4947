package product

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/pipeline/instrument"
)

// What Header writes ReadSchema reads.
func TestReadSchema(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := Schema{
			Elements: rapid.IntRange(1, 200).Draw(t, "elements"), Rows: rapid.IntRange(1, 99).Draw(t, "rows"),
			Grid: instrument.Grid{FirstNM: rapid.Float64Range(300, 2000).Draw(t, "first"), StepNM: rapid.Float64Range(0.01, 2).Draw(t, "step"), Count: 7,
				Axis: instrument.Axis(rapid.IntRange(0, 1).Draw(t, "axis")), Spacing: instrument.Spacing(rapid.IntRange(0, 1).Draw(t, "spacing"))},
			RADeg: rapid.Float64Range(0, 359).Draw(t, "ra"), DecDeg: rapid.Float64Range(-89, 89).Draw(t, "dec"),
			RowCenter: rapid.Float64Range(-5, 99).Draw(t, "row"), RotangDeg: rapid.Float64Range(-179, 179).Draw(t, "rotang"),
			ElementShift: rapid.SampledFrom([]float64{0, -3, 2.5}).Draw(t, "shift"),
			Parity:       rapid.SampledFrom([]int{1, -1}).Draw(t, "parity"),
			C1Deg:        rapid.Float64Range(1e-5, 1e-3).Draw(t, "c1"), C2Deg: rapid.Float64Range(1e-5, 1e-3).Draw(t, "c2"),
			Frame: SpectralFrame{Name: Topocentric},
		}
		if rapid.Bool().Draw(t, "barycentric") {
			s.Frame = SpectralFrame{Name: Barycentric, Factor: 1 + rapid.Float64Range(-1e-4, 1e-4).Draw(t, "v/c")}
		}
		h, err := s.Header(UnitSignal)
		require.NoError(t, err)
		back, err := ReadSchema(h, s.Axes())
		require.NoError(t, err)
		for _, p := range []struct{ want, have float64 }{
			{s.RotangDeg, back.RotangDeg}, {s.C1Deg * 1e6, back.C1Deg * 1e6}, {s.C2Deg * 1e6, back.C2Deg * 1e6},
			{s.RowCenter, back.RowCenter}, {s.ElementShift, back.ElementShift}, {s.Frame.Factor, back.Frame.Factor},
		} {
			require.InDelta(t, p.want, p.have, 1e-9)
		}
		back.RotangDeg, back.C1Deg, back.C2Deg, back.RowCenter, back.ElementShift, back.Frame.Factor = s.RotangDeg, s.C1Deg, s.C2Deg, s.RowCenter, s.ElementShift, s.Frame.Factor
		require.Equal(t, s, back)
	})
}

func TestReadSchemaRefuses(t *testing.T) {
	s := smallSchema(t, "optical", 30, 1)
	for _, c := range []struct {
		key   string
		value any
		want  string
	}{
		{"CTYPE3", "FREQ", `CTYPE3 is "FREQ"`}, {"CTYPE1", "GLON-TAN", `CTYPE1 is "GLON-TAN"`},
		{"CRVAL1", nil, "CRVAL1"}, {"CRPIX3", 2.0, "CRPIX3 is not 1"}, {"CD1_1", "north", "CD1_1"},
		{"SPECSYS", 3, "SPECSYS"}, {"CUNIT3", "um", `CUNIT3 is "um"`},
	} {
		h, err := s.Header(UnitSignal)
		require.NoError(t, err)
		if c.value == nil {
			h.Delete(c.key)
		} else {
			require.NoError(t, h.Set(c.key, c.value, ""))
		}
		_, err = ReadSchema(h, s.Axes())
		require.ErrorContains(t, err, c.want)
	}
	h, err := s.Header(UnitSignal)
	require.NoError(t, err)
	_, err = ReadSchema(h, []int{3, 4})
	require.ErrorContains(t, err, "2 axes")
	for _, k := range []string{"CD1_1", "CD1_2", "CD2_1", "CD2_2"} {
		require.NoError(t, h.Set(k, 0.0, ""))
	}
	_, err = ReadSchema(h, s.Axes())
	require.ErrorContains(t, err, "singular")
}

// A cube that begins 3 elements further on has its field's centre 3 elements less far in.
func TestElementShift(t *testing.T) {
	s := smallSchema(t, "optical", 30, 1)
	other := s
	other.Elements += 4
	other.ElementShift = 1 // 3 more elements in front, one behind
	e, n := s.Offset(2, 1)
	e2, n2 := other.Offset(5, 1)
	require.InDelta(t, 0, math.Hypot(e-e2, n-n2), 1e-12)
	j, y := other.Place(e, n)
	require.InDelta(t, 5, j, 1e-9)
	require.InDelta(t, 1, y, 1e-9)
}
