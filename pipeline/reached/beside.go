package reached

import (
	"math"

	"mirrorloom/pipeline/product"
)

// besideAll is the factor of unwanted light beside all measurements that tell it, nil for none.
func besideAll(all []measurement) *product.Measured {
	return meanOf(all, func(m *measurement) (ratio, err float64, ok bool) { return m.ratio, m.error, m.told })
}

// mostlySky is the part of the forecast's unwanted light from which on it is the sky's.
const mostlySky = 0.8

// skyOf is the sky's light over the forecast's, nil where it cannot be told: of the sky taken
// off, else of unwanted light that is the sky's.
func skyOf(all []measurement) *product.Measured {
	taken, expected := 0.0, 0.0
	for i := range all {
		if all[i].skyTaken > 0 {
			taken += all[i].skyTaken
			expected += all[i].in.sky
		}
	}
	if expected > 0 {
		return &product.Measured{Value: taken / expected}
	}
	return meanOf(all, func(m *measurement) (ratio, err float64, ok bool) {
		return m.ratio, m.error, m.told && m.beside.sky > mostlySky*m.beside.unwanted
	})
}

// meanOf is a mean by weights 1/error^2; its error is that of the weights, or that by which
// the values differ if it is larger.
func meanOf(all []measurement, of func(*measurement) (ratio, err float64, ok bool)) *product.Measured {
	var values, weights []float64
	sum, total := 0.0, 0.0
	for i := range all {
		if ratio, err, ok := of(&all[i]); ok && err > 0 {
			values, weights = append(values, ratio), append(weights, 1/(err*err))
			sum += ratio / (err * err)
			total += 1 / (err * err)
		}
	}
	if total == 0 {
		return nil
	}
	m := &product.Measured{Value: sum / total, Error: math.Sqrt(1 / total)}
	if len(values) > 1 {
		chi2 := 0.0
		for i, v := range values {
			chi2 += weights[i] * (v - m.Value) * (v - m.Value)
		}
		m.Error *= math.Sqrt(math.Max(1, chi2/float64(len(values)-1)))
	}
	return m
}
