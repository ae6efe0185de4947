package trial

import (
	"fmt"
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
)

// reachOf is how far from its centre a source of a scene certainly is one, arc seconds:
// inner and outer.
func reachOf(s *rehearse.Source, seeing float64) (inner, outer float64) {
	switch s.Kind {
	case rehearse.KindRing:
		half := (s.WidthArcsec + seeing) / 2
		return max(0, s.RadiusArcsec-half), s.RadiusArcsec + half
	case rehearse.KindGaussian:
		return 0, (s.WidthArcsec + seeing) / 2
	case rehearse.KindGalaxy:
		return 0, s.RadiusArcsec + seeing/2
	}
	return 0, seeing
}

// BlankFindings check the sky of the night named name against its scene: no place of it
// lies in a source, and the light of sources in the sky's mean, which the truth tells, is
// below an error of the sky at every wavelength.
func (n *Night) BlankFindings(what, name string) ([]Finding, error) {
	f, err := fitsutil.Open(n.CubePath(name))
	if err != nil {
		return nil, err
	}
	defer f.Close() // only read from
	done, err := product.ReadOnSky(f)
	if err != nil {
		return nil, err
	}
	if done.Sky == nil {
		return nil, fmt.Errorf("%s has no sky taken off", f.Path())
	}
	share, axes, err := readImage(f, product.SkyShare)
	if err != nil {
		return nil, err
	}
	share = share[:axes[0]*axes[1]]
	c, err := ReadCube(n.CubePath(name))
	if err != nil {
		return nil, err
	}
	truth, err := n.SkylessTruth(c, name)
	if err != nil {
		return nil, err
	}
	schema := product.NewSchema(n.Seq)
	blank, inside := 0, 0
	for i, w := range share {
		if w == 0 {
			continue
		}
		blank++
		east, north := schema.Offset(float64(i%c.N), float64(i/c.N))
		for k := range n.Field.Scene.Sources {
			s := &n.Field.Scene.Sources[k]
			inner, outer := reachOf(s, n.Field.Scene.SeeingFWHMArcsec)
			if d := math.Hypot(east-s.EastArcsec, north-s.NorthArcsec); d >= inner && d <= outer {
				inside++
				break
			}
		}
	}
	worst, sum, some := 0.0, 0.0, 0.0
	for l, v := range done.Sky.Variance {
		light, weight := 0.0, 0.0
		for i, w := range share {
			if at := l*len(share) + i; w > 0 && c.Good(at) {
				light, weight = light+float64(w)*float64(truth[at]), weight+float64(w)
			}
		}
		if weight > 0 && v > 0 {
			x := light / weight / math.Sqrt(v)
			worst, sum, some = max(worst, x), sum+x, some+1
		}
	}
	return []Finding{
		AtLeast(what+": places of blank sky", float64(blank), 100, blank),
		Below(what+": of these within a source of the scene", float64(inside), 0.5, blank),
		Below(what+": light of sources in the sky over its error, mean over wavelength", sum/some, 0.3, int(some)),
		Below(what+": the same at the worst wavelength", worst, 1, int(some)),
	}, nil
}

// SkyResiduals are mean residuals of nights without their sky, each over all good voxels
// that are not among the places the sky was taken from: apart from lines, and at lines.
type SkyResiduals struct {
	Quiet, Lines Moments // a night each
	Pulls        Moments // of all voxels
	LinePulls    Moments
}

// Add takes the night named name.
func (s *SkyResiduals) Add(n *Night, name string) error {
	c, err := ReadCube(n.CubePath(name))
	if err != nil {
		return err
	}
	truth, err := n.SkylessTruth(c, name)
	if err != nil {
		return err
	}
	f, err := fitsutil.Open(n.CubePath(name))
	if err != nil {
		return err
	}
	defer f.Close() // only read from
	share, _, err := readImage(f, product.SkyShare)
	if err != nil {
		return err
	}
	plane := c.N * c.Rows
	var sums [2]Moments
	for i, t := range truth {
		if !c.Good(i) || t != t {
			continue
		}
		off, at := float64(c.Signal[i]-t), 0
		pull := off / math.Sqrt(float64(c.Variance[i]))
		s.Pulls.Add(pull)
		if c.Flags[i]&product.FlagSkyLine != 0 {
			s.LinePulls.Add(pull)
			at = 1
		}
		if share[i%plane] == 0 {
			sums[at].Add(off)
		}
	}
	s.Quiet.Add(sums[0].Mean())
	s.Lines.Add(sums[1].Mean())
	return nil
}

// Findings judge them.
func (s *SkyResiduals) Findings(what string) []Finding {
	of := func(words string, m *Moments) Finding {
		n := float64(m.N)
		err := m.Std() / math.Sqrt(n-1) // of the mean
		return Below(fmt.Sprintf("%s: mean residual %s, %.2g e, in standard errors of the nights' scatter", what, words, m.Mean()), math.Abs(m.Mean())/err, 3, m.N)
	}
	return []Finding{
		of("apart from lines", &s.Quiet), of("at lines of the sky", &s.Lines),
		Near(what+": standard deviation of pulls", s.Pulls.Std(), 1, 0.05, 0, s.Pulls.N/2),
		Near(what+": the same at lines", s.LinePulls.Std(), 1, 0.05, 0, s.LinePulls.N/2),
	}
}
