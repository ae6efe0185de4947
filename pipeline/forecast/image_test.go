package forecast

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// A mirror's part of a star, a ring and a galaxy, against scipy's integrals.
func TestImagesAgainstScipy(t *testing.T) {
	const ring, rim, disc, sigma = 9.0, 2.5, 6.0, 1.8
	mirrors := [][2]float64{{0, 0}, {1, 0}, {0, 3}, {-4, 2}, {7, 5}, {9, 0}, {12, 1}}
	var places []string
	for _, m := range mirrors {
		places = append(places, fmt.Sprintf("%g,%g", m[0], m[1]))
	}
	for _, c := range []struct {
		kind          string
		image         image
		radius, width float64
		tolerance     float64
	}{
		{"star", roundImage{sigma}, 0, 0, 1e-9},
		{"ring", newProfileImage(func(r float64) float64 { return math.Exp(-0.5 * math.Pow((r-ring)/rim, 2)) }, ring+8*rim, sigma, rim), ring, rim, 2e-3},
		{"galaxy", newProfileImage(func(r float64) float64 { return math.Exp(-r / disc) }, 25*disc, sigma, disc), disc, 0, 2e-3},
	} {
		args := append([]string{c.kind, fmt.Sprint(c.radius), fmt.Sprint(c.width), fmt.Sprint(sigma)}, places...)
		lines := strings.Fields(outside.Python(t, "forecast_images.py", args...))
		require.Len(t, lines, len(mirrors))
		for i, m := range mirrors {
			want, err := strconv.ParseFloat(lines[i], 64)
			require.NoError(t, err)
			// A part in a thousand, or of what the brightest mirror gets.
			require.InDelta(t, want, c.image.part(m[0], m[1]), c.tolerance*max(want, 1e-4), "%s at %v", c.kind, m)
		}
	}
}

// All mirrors together get all the light.
func TestImagesAreWhole(t *testing.T) {
	for name, image := range map[string]image{
		"star":   roundImage{1.3},
		"ring":   newProfileImage(func(r float64) float64 { return math.Exp(-0.5 * math.Pow((r-7)/1.5, 2)) }, 7+12, 1.6, 1.5),
		"galaxy": newProfileImage(func(r float64) float64 { return math.Exp(-r / 3) }, 75, 1.6, 3),
	} {
		sum, reach := 0.0, int(image.reach())+1
		for c := -reach; c <= reach; c++ {
			for r := -reach; r <= reach; r++ {
				sum += image.part(float64(c)+0.3, float64(r)-0.2)
			}
		}
		require.InDelta(t, 1, sum, 1e-3, name)
	}
}

func TestBetween(t *testing.T) {
	require.InDelta(t, 0.6826894921370859, between(-1, 1, 1), 1e-15)
	require.InEpsilon(t, between(-9, -8, 1), between(8, 9, 1), 1e-12, "both tails alike")
}
