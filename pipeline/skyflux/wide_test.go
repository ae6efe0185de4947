package skyflux

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
)

// wideScene is a star at a place in a wide element, a voxel to an element, whose light,
// by voxel, is band times counts; rows of uneven response and a sky in all of them.
type wideScene struct {
	place, row, sigma float64
	counts, sky       float64
	band              func(l float64) float64
	noise             bool
}

func (s wideScene) wide() *Wide {
	const voxels, beyond, rows, first, last = 300, 20, 60, 5, 24
	n := voxels + 2*beyond
	w := &Wide{
		Beyond: beyond, First: first, Last: last, ElementArcsec: 0.4, RowArcsec: 0.4, Correlated: 1, BlurRows: 1,
		Response: func(_, y, _ int) float64 { return 1 + 0.1*math.Sin(float64(y)) },
	}
	for range rows {
		w.Usable = append(w.Usable, true)
	}
	for l := range n {
		w.Edges = append(w.Edges, 500+0.5*float64(l))
		w.Model = append(w.Model, 1000*s.band(float64(l)))
		w.Blur, w.Slope = append(w.Blur, 1), append(w.Slope, 1)
	}
	w.Edges = append(w.Edges, 500+0.5*float64(n))
	along := math.Sqrt(s.sigma*s.sigma + 1)
	w.Row = func(y int, place float64, signal, variance []float32, flags []calib.Flag) {
		rng := rand.New(rand.NewPCG(5, uint64(y))) // as the frame's: the same at every place
		u := (float64(y) - s.row) / along
		profile := math.Exp(-u*u/2) / (math.Sqrt(2*math.Pi) * along)
		for l := range signal {
			at, seen, weight := float64(l)+place-s.place, 0.0, 0.0
			for k := -20; k <= 20; k++ { // the star's width, and a line's
				d := float64(k) / 4
				g := math.Exp(-d * d / (2 * (s.sigma*s.sigma + 1)))
				seen, weight = seen+g*s.band(at+d), weight+g
			}
			light := w.Response(0, y, 0) * (s.counts*seen/weight*profile + s.sky)
			variance[l] = float32(light + 9)
			if s.noise {
				light += rng.NormFloat64() * math.Sqrt(light+9)
			}
			signal[l], flags[l] = float32(light), 0
		}
	}
	return w
}

// band has ends within what is seen, and a line.
func bandWithEnds(l float64) float64 {
	end := 1 / (1 + math.Exp((15-l)/2)) / (1 + math.Exp((l-325)/2))
	return end * (1 - 0.3*math.Exp(-(l-120)*(l-120)/50)) * (1 + 0.001*l)
}

// A star is found where it stands, off the middle, and its light is that of the scene
// wherever that is smooth over the star's width; rows away from it tell the sky.
func TestWideStar(t *testing.T) {
	for _, noise := range []bool{false, true} {
		s := wideScene{place: 17.3, row: 28.4, sigma: 1.4, counts: 4e4, sky: 150, band: bandWithEnds, noise: noise}
		star, err := s.wide().Measure(t.Context())
		require.NoError(t, err)
		require.True(t, star.PlaceMeasured)
		require.Less(t, star.PlaceError, 0.1)
		require.InDelta(t, s.place, star.Element, max(0.02, 5*star.PlaceError))
		require.InDelta(t, s.row, star.Row, 0.02)
		require.InDelta(t, s.sigma*fwhmPerSigma*0.4, star.FWHMArcsec, 0.03)
		sum, want, variance := 0.0, 0.0, 0.0
		for l := range star.Counts {
			require.InDelta(t, 1, star.Fraction[l], 1e-3)
			sum, want = sum+star.Counts[l]/star.Fraction[l], want+s.counts*s.band(float64(l+20))
			variance += star.Variance[l]
		}
		tolerance := 2e-3 * want // for the line, whose blur the model knows at the place found
		if noise {
			tolerance += 5 * math.Sqrt(variance)
		}
		require.InDelta(t, want, sum, tolerance)
	}
}

// Light without ends or lines does not tell the place: it is assumed, with its error.
func TestWideStarSmooth(t *testing.T) {
	s := wideScene{place: 16, row: 30, sigma: 1.4, counts: 4e4, sky: 150, band: func(l float64) float64 { return 1 + 0.002*l }, noise: true}
	star, err := s.wide().Measure(t.Context())
	require.NoError(t, err)
	require.False(t, star.PlaceMeasured)
	require.Equal(t, 14.5, star.Element)
	require.InDelta(t, placeAssumedArcsec/0.4, star.PlaceError, 1e-9)
	for l, e := range star.Misplaced[5:295] {
		slope := 0.002 / (1 + 0.002*float64(l+25))
		require.InDelta(t, slope*star.PlaceError, e, 0.1*slope*star.PlaceError)
	}
}

// What shows no star, or leaves no row for the sky, is refused with the cure.
func TestWideRefusals(t *testing.T) {
	s := wideScene{place: 16, row: 30, sigma: 1.4, counts: 1, sky: 150, band: bandWithEnds, noise: true}
	_, err := s.wide().Measure(t.Context())
	require.ErrorContains(t, err, "no star stands out of the sky in the refstar frames; check calibration.refstar's position")
	s.counts = 4e4
	w := s.wide()
	w.RadiusArcsec = 0.4 * 40
	_, err = w.Measure(t.Context())
	require.ErrorContains(t, err, "give a smaller flux.radius_arcsec")
	w = s.wide()
	clear(w.Usable)
	_, err = w.Measure(t.Context())
	require.ErrorContains(t, err, "0 usable rows")
}
