package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// skyField is a picture of 80 rows and 60 elements with a sky of 1000, noise of 10 a place,
// and what light adds.
func skyField(seed uint64, light func(y, j float64) float64) (picture, variance, sources []float64) {
	rng := rand.New(rand.NewPCG(seed, 11))
	const rows, elements, sky, sigma = 80, 60, 1000, 10.0
	for y := range rows {
		for j := range elements {
			s := light(float64(y), float64(j))
			q := sigma*sigma + s/10
			sources = append(sources, s)
			variance = append(variance, q)
			picture = append(picture, sky+s+math.Sqrt(q)*rng.NormFloat64())
		}
	}
	return picture, variance, sources
}

func gauss2(y, j, atY, atJ, peak, sigma float64) float64 {
	return peak * math.Exp(-((y-atY)*(y-atY)+(j-atJ)*(j-atJ))/(2*sigma*sigma))
}

// A star of 1000 sigma, faint stars, and a nebula that no single place shows: what is
// called blank holds no light of 0.6 sigma, and on average less than 0.03 (twice the error of
// the mean sky); a third of the
// field or more is kept; level and scale are right.
func TestSkyChoice(t *testing.T) {
	for seed := range uint64(12) {
		picture, variance, sources := skyField(seed, func(y, j float64) float64 {
			return gauss2(y, j, 20, 15, 10000, 1.8) + gauss2(y, j, 60, 40, 60, 1.5) + gauss2(y, j, 30, 48, 200, 1.2) + gauss2(y, j, 55, 12, 12, 8)
		})
		choice, err := DefaultSkyRule().Choose(picture, variance, 60)
		require.NoError(t, err)
		sum, worst, mean := 0.0, 0.0, 0.0
		for i, is := range choice.Blank {
			if is {
				sum += sources[i]
				worst = max(worst, sources[i])
				mean += picture[i] / float64(choice.Count)
			}
		}
		t.Logf("%d blank, rings %d, mean light %.3f, most %.2f, level %.2f, scale %.3f", choice.Count, choice.Rings, sum/float64(choice.Count), worst, choice.Level, choice.Scale)
		require.Greater(t, choice.Count, 80*60/3)
		require.Less(t, worst, 6.0)
		require.Less(t, sum/float64(choice.Count), 0.3)
		n := float64(choice.Count)
		require.InDelta(t, 1000, mean, 0.3+3*10/math.Sqrt(n)) // 3 standard errors
		require.InDelta(t, 1, choice.Scale, 0.1)
	}
}

// An empty field is blank but for what noise and its rings take; errors too small by 2 are
// found out; unusable places are not chosen.
func TestSkyChoiceEmpty(t *testing.T) {
	picture, variance, _ := skyField(3, func(y, j float64) float64 { return 0 })
	choice, err := DefaultSkyRule().Choose(picture, variance, 60)
	require.NoError(t, err)
	require.Greater(t, choice.Count, 4650) // 97 % of 4800
	picture[7], variance[8], variance[9] = math.NaN(), 0, math.Inf(1)
	for i := range variance {
		variance[i] /= 4
	}
	choice, err = DefaultSkyRule().Choose(picture, variance, 60)
	require.NoError(t, err)
	require.InDelta(t, 2, choice.Scale, 0.1)
	require.Greater(t, choice.Count, 4600)
	require.Equal(t, []bool{false, false, false}, choice.Blank[7:10])
}

func TestSkyChoiceRefused(t *testing.T) {
	picture, variance, _ := skyField(4, func(y, j float64) float64 { return 0 })
	_, err := DefaultSkyRule().Choose(picture, variance[1:], 60)
	require.ErrorContains(t, err, "no rows of 60 elements")
	rule := DefaultSkyRule()
	rule.Least = 0.999
	_, err = rule.Choose(picture, variance, 60)
	require.ErrorContains(t, err, "usable places look blank")
	for i := range variance {
		variance[i] = 0
	}
	_, err = DefaultSkyRule().Choose(picture, variance, 60)
	require.ErrorContains(t, err, "0 of 0 usable places")
}

// skyLight is a continuum of 20 with three lines; voxels 30, 31 and 60.
func skyLight(l int) float64 {
	v := 20 + 0.02*float64(l)
	switch l {
	case 30, 60:
		v += 200
	case 31:
		v += 100
	}
	return v
}

// Many fields of known sky, subtracted: the residual of blank and of other places is 0
// within 3 standard errors, at lines too; pulls are 1; two places covary as Covariance
// says. 1600 fields.
func TestSkySubtract(t *testing.T) {
	const rows, elements, voxels, fields = 6, 5, 80, 1600
	rng := rand.New(rand.NewPCG(9, 9))
	blank := make([]bool, rows*elements)
	for i := range blank {
		blank[i] = i%3 != 0 // 20 of 30
	}
	variance0 := make([]float64, rows*elements) // the picture's
	for i := range variance0 {
		variance0[i] = 1 + float64(i%4)
	}
	pulls := map[string]*[3]float64{"blank": {}, "other": {}, "blank line": {}, "other line": {}}
	covariance, said := [2]float64{}, [2]float64{}
	for range fields {
		signal := make([][]float32, rows)
		variance := make([][]float32, rows)
		flags := make([][]Flag, rows)
		sum := NewSkySum(blank, variance0, elements, voxels)
		for y := range rows {
			signal[y], variance[y], flags[y] = make([]float32, voxels*elements), make([]float32, voxels*elements), make([]Flag, voxels*elements)
			for l := range voxels {
				for j := range elements {
					q := (skyLight(l) + 30) * variance0[y*elements+j]
					signal[y][l*elements+j] = float32(skyLight(l) + math.Sqrt(q)*rng.NormFloat64())
					variance[y][l*elements+j] = float32(q)
				}
			}
			flags[y][3] = BadPixel // element 3, voxel 0
			signal[y][3] = 1e6
		}
		for _, y := range []int{3, 0, 5, 1, 4, 2} {
			sum.AddRow(y, signal[y], variance[y], flags[y], BadPixel)
		}
		sky, err := sum.Spectrum(1, DefaultSkyLineRule())
		require.NoError(t, err)
		for l, line := range sky.Line {
			require.Equal(t, l == 30 || l == 31 || l == 60, line, "voxel %d", l)
		}
		var before [rows][]float32
		for y := range rows {
			before[y] = append([]float32(nil), variance[y]...)
			sky.Subtract(y, signal[y], variance[y], flags[y], BadPixel)
		}
		for y := range rows {
			for l := 1; l < voxels; l++ {
				for j := range elements {
					kind := "other"
					if blank[y*elements+j] {
						kind = "blank"
					}
					if flags[y][l*elements+j]&SkyLine != 0 {
						kind += " line"
					}
					pull := float64(signal[y][l*elements+j]) / math.Sqrt(float64(variance[y][l*elements+j]))
					p := pulls[kind]
					p[0]++
					p[1] += pull
					p[2] += pull * pull
				}
			}
		}
		share := func(y, j, l int) float64 {
			if !blank[y*elements+j] {
				return 0
			}
			return 1 / variance0[y*elements+j] / sky.TotalWeight[l]
		}
		for l := 1; l < voxels; l++ { // a pair of other places, a pair of blank ones
			for k, pair := range [2][4]int{{0, 0, 0, 3}, {0, 1, 1, 3}} {
				a, b := l*elements+pair[1], l*elements+pair[3]
				covariance[k] += float64(signal[pair[0]][a]) * float64(signal[pair[2]][b]) / fields
				said[k] += sky.Covariance(l, float64(before[pair[0]][a]), share(pair[0], pair[1], l), float64(before[pair[2]][b]), share(pair[2], pair[3], l)) / fields
			}
		}
	}
	for kind, p := range pulls {
		// Voxels of a field share its sky: independent are fields x voxels, at least.
		mean, rms, independent := p[1]/p[0], math.Sqrt(p[2]/p[0]), p[0]/(rows*elements)
		t.Logf("%s: mean %.4f, rms %.4f of %.0f", kind, mean, rms, p[0])
		require.InDelta(t, 0, mean, 3*math.Sqrt(0.1/independent+1/p[0])) // var of the sky is < 0.1 of a voxel's
		require.InDelta(t, 1, rms, max(0.01, 5/math.Sqrt(2*independent)))
	}
	t.Logf("covariance %.1f, said %.1f; blank %.1f, said %.1f", covariance[0], said[0], covariance[1], said[1])
	// Products of two values of variance ~ 50 x 2.5, 79 voxels, 1600 fields.
	for k := range said {
		require.InDelta(t, said[k], covariance[k], 5*125*math.Sqrt(79.0/fields))
	}
	require.Greater(t, said[0], 0.0)
	require.Less(t, said[1], 0.0)
}

// Without a sky there is no value; equal weights are a plain mean.
func TestSkyVoid(t *testing.T) {
	sum := NewSkySum([]bool{true, true, false}, nil, 3, 2)
	signal, variance, flags := []float32{1, 3, 9, 5, 5, 5}, []float32{1, 1, 1, 1, 1, 1}, []Flag{0, 0, 0, BadPixel, BadPixel, 0}
	sum.AddRow(0, signal, variance, flags, BadPixel)
	sky, err := sum.Spectrum(2, DefaultSkyLineRule())
	require.NoError(t, err)
	require.Equal(t, 2.0, sky.Value[0])
	require.Equal(t, 1.0, sky.Variance[0]) // 2 x 1/2
	require.Equal(t, []int{2, 0}, sky.Places)
	sky.Subtract(0, signal, variance, flags, BadPixel)
	require.Equal(t, []float32{-1, 1, 7}, signal[:3])
	require.Equal(t, []float32{1, 1, 2}, variance[:3]) // 1 - 2/2 + 1
	for i := 3; i < 6; i++ {
		require.True(t, math.IsNaN(float64(signal[i])) && math.IsNaN(float64(variance[i])))
		require.NotZero(t, flags[i]&NoData)
	}
	_, err = NewSkySum([]bool{false}, nil, 1, 2).Spectrum(1, DefaultSkyLineRule())
	require.ErrorContains(t, err, "none of the blank places")
}
