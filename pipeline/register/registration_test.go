package register

import (
	"math"
	"math/rand/v2"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

func TestRegistrationFile(t *testing.T) {
	r := &Registration{Profile: "tiny", SequenceSHA: "ab", Stars: 4, RMSArcsec: 0.03, RotationDeg: -3.25, RotationErrorDeg: 0.01,
		Scale: 1.02, ScaleError: 1e-4, Parity: -1, OffsetUArcsec: 3, OffsetWArcsec: -7.5, OffsetErrorArcsec: 0.02}
	path := filepath.Join(t.TempDir(), File)
	require.NoError(t, r.Write(path))
	back, err := Read(path)
	require.NoError(t, err)
	require.Equal(t, r, back)
	_, err = Read(path + "x")
	require.ErrorContains(t, err, "open the registration")
	for _, c := range []struct{ change, want string }{
		{"parity: 2", "parity"}, {"scale: 3", "scale"}, {"profile: \"\"", "profile"}, {"stars: 2", "stars"}, {"turn: 1", "turn"},
		{"offset_u_arcsec: 1e6", "offset_u_arcsec"},
	} {
		text := "profile: tiny\nsequence_sha256: ab\nstars: 4\nrms_arcsec: 0.03\nrotation_deg: 1\nrotation_error_deg: 0.1\nscale: 1\nscale_error: 0.1\nparity: 1\noffset_u_arcsec: 1\noffset_w_arcsec: 2\noffset_error_arcsec: 0.1\n"
		r, err := parse("r.yaml", []byte(replaceKey(text, c.change)))
		require.Nil(t, r)
		require.ErrorContains(t, err, "r.yaml:")
		require.ErrorContains(t, err, c.want)
	}
}

// Where the telescope is sent, the field lies where it was asked for: the measured offset
// and turn, applied to the place that Pointed gives, lead to the target.
func TestPointed(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		r := &Registration{RotationDeg: rapid.Float64Range(-20, 20).Draw(t, "rotation"), Parity: rapid.SampledFrom([]int{1, -1}).Draw(t, "parity"), Scale: 1,
			OffsetUArcsec: rapid.Float64Range(-30, 30).Draw(t, "u"), OffsetWArcsec: rapid.Float64Range(-30, 30).Draw(t, "w")}
		s := askedSchema()
		s.DecDeg = rapid.Float64Range(-60, 60).Draw(t, "dec")
		s.RotangDeg = rapid.Float64Range(-180, 180).Draw(t, "rotang")
		middle := rapid.Float64Range(-0.3, 0.3).Draw(t, "middle")
		ra, dec, rotang := r.Pointed(s.RADeg, s.DecDeg, s.RotangDeg, middle)
		require.InDelta(t, 0, math.Remainder(rotang+r.RotationDeg-s.RotangDeg, 360), 1e-9)
		// The telescope's field, before its errors, is at ra, dec; its errors bring the
		// device's middle to the offset along its own axes.
		at := s
		at.RADeg, at.DecDeg = ra, dec
		east, north := offset(r.OffsetUArcsec+middle, r.OffsetWArcsec, s.RotangDeg, r.Parity)
		at = at.Repointed(east, north, 0)
		require.InDelta(t, s.RADeg, at.RADeg, 1e-2/3600/math.Cos(s.DecDeg*math.Pi/180))
		require.InDelta(t, s.DecDeg, at.DecDeg, 1e-2/3600)
	})
}

// A telescope with errors: the registration of its first night gives them, that of a night
// pointed by it, with elements elsewhere on the device, gives them again.
func TestRegistrationTwice(t *testing.T) {
	for n, c := range []struct {
		turn, scale float64
		parity      int
	}{{7, 1.03, 1}, {-40, 0.97, -1}} {
		rng := rand.New(rand.NewPCG(7, uint64(n)))
		const offsetU, offsetW = 3.2, -4.1
		asked := askedSchema()
		// The device's middle is MiddleArcsec behind that of the elements.
		night := func(askedRotang, commandRA, commandDec, commandRotang, middle, scale float64, parity int) (truth [2]float64, rotang float64) {
			rotang = commandRotang + c.turn
			s := asked
			s.RADeg, s.DecDeg = commandRA, commandDec
			e, w := offset(offsetU+middle*scale, offsetW, rotang, parity)
			s = s.Repointed(e, w, 0)
			return [2]float64{s.RADeg, s.DecDeg}, rotang
		}
		const middle = 0.14
		place, rotang := night(asked.RotangDeg, asked.RADeg, asked.DecDeg, asked.RotangDeg, middle, c.scale, c.parity)
		truth := asked
		truth.RADeg, truth.DecDeg, truth.RotangDeg, truth.Parity = place[0], place[1], rotang, c.parity
		truth.C1Deg *= c.scale
		truth.C2Deg *= c.scale
		k := newSky(rng, truth, 9)
		got, err := Solve(k.picture(rng, truth, 1), asked, k.stars, "", Rule{Similarity, 5})
		require.NoError(t, err)
		first := got.Registration(asked, Device{Profile: "p", MiddleArcsec: middle})
		require.NotNil(t, first)
		check := func(r *Registration) {
			require.InDelta(t, c.turn, r.RotationDeg, 0.1)
			require.InDelta(t, c.scale, r.Scale, 1e-3)
			require.Equal(t, c.parity, r.Parity)
			require.InDelta(t, offsetU, r.OffsetUArcsec, 0.05)
			require.InDelta(t, offsetW, r.OffsetWArcsec, 0.05)
		}
		check(first)
		// The next night, elsewhere and with other elements.
		next := asked
		next.RADeg, next.RotangDeg, next.Parity = 200.5, -15, first.Parity
		next.C1Deg *= first.Scale
		next.C2Deg *= first.Scale
		const middle2 = -0.14
		ra, dec, command := first.Pointed(next.RADeg, next.DecDeg, next.RotangDeg, middle2*first.Scale)
		place, rotang = night(next.RotangDeg, ra, dec, command, middle2, c.scale, c.parity)
		truth = next
		truth.RADeg, truth.DecDeg, truth.RotangDeg = place[0], place[1], rotang
		truth.C1Deg, truth.C2Deg = asked.C1Deg*c.scale, asked.C2Deg*c.scale
		require.Less(t, apart(next, truth), 0.1, "the field lies where it was asked for")
		k = newSky(rng, truth, 9)
		got, err = Solve(k.picture(rng, truth, 1), next, k.stars, "", Rule{Pointing, 5})
		require.NoError(t, err)
		second := got.Registration(next, Device{Profile: "p", MiddleArcsec: middle2 * first.Scale, Before: first})
		require.NotNil(t, second)
		check(second)
	}
}

func FuzzRegistration(f *testing.F) {
	f.Add([]byte("profile: tiny\nparity: 1\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		if r, err := parse("r.yaml", data); err != nil {
			require.Nil(t, r)
		}
	})
}

// replaceKey puts a line in the place of that with the same key, or behind all.
func replaceKey(text, line string) string {
	key, _, _ := strings.Cut(line, ":")
	lines, found := strings.Split(strings.TrimSpace(text), "\n"), false
	for i, l := range lines {
		if strings.HasPrefix(l, key+":") {
			lines[i], found = line, true
		}
	}
	if !found {
		lines = append(lines, line)
	}
	return strings.Join(lines, "\n") + "\n"
}
