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
		choice, err := DefaultSkyRule().Choose(picture, variance, 60, nil)
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
	choice, err := DefaultSkyRule().Choose(picture, variance, 60, nil)
	require.NoError(t, err)
	require.Greater(t, choice.Count, 4650) // 97 % of 4800
	picture[7], variance[8], variance[9] = math.NaN(), 0, math.Inf(1)
	for i := range variance {
		variance[i] /= 4
	}
	choice, err = DefaultSkyRule().Choose(picture, variance, 60, nil)
	require.NoError(t, err)
	require.InDelta(t, 2, choice.Scale, 0.1)
	require.Greater(t, choice.Count, 4600)
	require.Equal(t, []bool{false, false, false}, choice.Blank[7:10])
}

// A nebula of 1 sigma a place in one band of fifty, unseen in white light, is found by
// its band and kept out of the sky with its wings; bands of noise take next to nothing.
func TestSkyPeaks(t *testing.T) {
	for seed := range uint64(6) {
		rule := DefaultSkyRule()
		peaks := rule.NewPeaks(80*60, 60)
		white, whiteVariance := make([]float64, 80*60), make([]float64, 80*60)
		var light []float64
		for band := range uint64(50) {
			picture, variance, sources := skyField(100*seed+band, func(y, j float64) float64 {
				if band != 20 {
					return 0
				}
				return gauss2(y, j, 40, 30, 15, 4)
			})
			peaks.Add(picture, variance)
			for i := range white {
				white[i] += picture[i] / 50
				whiteVariance[i] += variance[i] / 2500
			}
			if band == 20 {
				light = sources
			}
		}
		found := peaks.Found()
		choice, err := rule.Choose(white, whiteVariance, 60, found)
		require.NoError(t, err)
		inside, worst, sum := 0, 0.0, 0.0
		for i, is := range choice.Blank {
			if is {
				worst, sum = max(worst, light[i]), sum+light[i]
			} else if light[i] < 0.1 {
				inside++
			}
		}
		t.Logf("%d blank, most %.2f, mean %.3f, %d blank places lost", choice.Count, worst, sum/float64(choice.Count), inside)
		require.Less(t, worst, 7.0) // 0.7 sigma
		require.Less(t, sum/float64(choice.Count), 0.15)
		require.Less(t, inside, 4800/20)
	}
}

func TestSkyChoiceRefused(t *testing.T) {
	picture, variance, _ := skyField(4, func(y, j float64) float64 { return 0 })
	_, err := DefaultSkyRule().Choose(picture, variance[1:], 60, nil)
	require.ErrorContains(t, err, "no rows of 60 elements")
	rule := DefaultSkyRule()
	rule.Least = 0.999
	_, err = rule.Choose(picture, variance, 60, nil)
	require.ErrorContains(t, err, "usable places look blank")
	for i := range variance {
		variance[i] = 0
	}
	_, err = DefaultSkyRule().Choose(picture, variance, 60, nil)
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
		signal, variance, flags := make([][]float32, voxels), make([][]float32, voxels), make([][]Flag, voxels)
		sum := NewSkySum(blank, variance0, elements, voxels)
		for l := range voxels {
			signal[l], variance[l], flags[l] = make([]float32, rows*elements), make([]float32, rows*elements), make([]Flag, rows*elements)
			for i := range signal[l] {
				q := (skyLight(l) + 30) * variance0[i]
				signal[l][i] = float32(skyLight(l) + math.Sqrt(q)*rng.NormFloat64())
				variance[l][i] = float32(q)
			}
		}
		for y := range rows {
			flags[0][y*elements+3] = BadPixel // element 3, voxel 0
			signal[0][y*elements+3] = 1e6
		}
		for i := range voxels {
			l := i * 37 % voxels // in any order
			sum.AddPlane(l, signal[l], variance[l], flags[l], BadPixel)
		}
		sky, err := sum.Spectrum(1, DefaultSkyLineRule())
		require.NoError(t, err)
		for l, line := range sky.Line {
			require.Equal(t, l == 30 || l == 31 || l == 60, line, "voxel %d", l)
		}
		require.Equal(t, []float64{1, 1}, []float64{sky.Correlated, sky.CorrelatedLines}) // too few elements to tell
		before := make([][]float32, voxels)
		for l := range voxels {
			before[l] = append([]float32(nil), variance[l]...)
			sky.Subtract(l, signal[l], variance[l], flags[l], BadPixel, nil)
		}
		for l := 1; l < voxels; l++ {
			for i := range rows * elements {
				kind := "other"
				if blank[i] {
					kind = "blank"
				}
				if flags[l][i]&SkyLine != 0 {
					kind += " line"
				}
				pull := float64(signal[l][i]) / math.Sqrt(float64(variance[l][i]))
				p := pulls[kind]
				p[0]++
				p[1] += pull
				p[2] += pull * pull
			}
		}
		share := func(i, l int) float64 { return sky.Weight[i] / sky.TotalWeight[l] }
		for l := 1; l < voxels; l++ { // a pair of other places, a pair of blank ones
			for k, pair := range [2][2]int{{0, 3}, {1, elements + 3}} {
				a, b := pair[0], pair[1]
				covariance[k] += float64(signal[l][a]) * float64(signal[l][b]) / fields
				said[k] += sky.Covariance(l, float64(before[l][a]), share(a, l), float64(before[l][b]), share(b, l)) / fields
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
	signal, variance, flags := [][]float32{{1, 3, 9}, {5, 5, 5}}, [][]float32{{1, 1, 1}, {1, 1, 1}}, [][]Flag{{0, 0, 0}, {BadPixel, BadPixel, 0}}
	require.Equal(t, 2.0, sum.AddPlane(0, signal[0], variance[0], flags[0], BadPixel))
	require.True(t, math.IsNaN(sum.AddPlane(1, signal[1], variance[1], flags[1], BadPixel)))
	sky, err := sum.Spectrum(2, DefaultSkyLineRule())
	require.NoError(t, err)
	require.Equal(t, 2.0, sky.Value[0])
	require.Equal(t, 1.0, sky.Variance[0]) // 2 x 1/2
	require.Equal(t, []int{2, 0}, sky.Places)
	for l := range 2 {
		sky.Subtract(l, signal[l], variance[l], flags[l], BadPixel, []float32{1, 1, 0.5})
	}
	require.Equal(t, []float32{-1, 1, 8}, signal[0])
	require.Equal(t, []float32{1, 1, 1.25}, variance[0]) // 1 - 2/2 + 1, 1 + 1/4
	for i := range 3 {
		require.True(t, math.IsNaN(float64(signal[1][i])) && math.IsNaN(float64(variance[1][i])))
		require.NotZero(t, flags[1][i]&NoData)
	}
	_, err = NewSkySum([]bool{false}, nil, 1, 2).Spectrum(1, DefaultSkyLineRule())
	require.ErrorContains(t, err, "none of the blank places")
}

// Rows of an element that share an error of 0.3 of a voxel's noise make the mean of 64 rows
// 1 + 64 0.09 = 6.8 times as uncertain as independent voxels would; what the scatter of 50
// elements says is within 5 standard errors of it, over 400 voxels. A plane that
// scatters too much is a line where the sky is brighter.
func TestSkyCorrelated(t *testing.T) {
	const rows, elements, voxels = 64, 50, 400
	rng := rand.New(rand.NewPCG(5, 77))
	blank := make([]bool, rows*elements)
	for i := range blank {
		blank[i] = true
	}
	sum := NewSkySum(blank, nil, elements, voxels)
	signal, variance, flags := make([]float32, rows*elements), make([]float32, rows*elements), make([]Flag, rows*elements)
	for l := range voxels {
		shared := make([]float64, elements)
		for j := range shared {
			shared[j] = 0.3 * rng.NormFloat64()
		}
		level, noise := 100.0, 1.0
		if l == 200 {
			level, noise = 130, 1.3 // not twice the continuum, but louder
		}
		for i := range signal {
			signal[i], variance[i] = float32(level+shared[i%elements]+noise*rng.NormFloat64()), 1
		}
		sum.AddPlane(l, signal, variance, flags, BadPixel)
	}
	sky, err := sum.Spectrum(1.2, DefaultSkyLineRule())
	require.NoError(t, err)
	require.InDelta(t, 1+rows*0.09, sky.Correlated, 5*6.8*math.Sqrt(2.0/(elements-1)/voxels))
	for l, line := range sky.Line {
		require.Equal(t, l == 200, line, "voxel %d", l)
	}
	require.InEpsilon(t, sky.Correlated/(rows*elements), sky.Variance[10], 1e-9)
}
