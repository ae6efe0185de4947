package trial

import (
	"math"
	"math/rand/v2"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Stick gives the field's device so many mirrors that do not move, on and off in turn:
// one in ten lies outside the field, every fourth of the others within two mirrors of a
// star of StarPlaces, and the rest anywhere in the coded field. Places are invented.
func (f *Field) Stick(seed uint64, count int) error {
	rng := rand.New(rand.NewPCG(seed, 10))
	p := f.Profile
	halfU, halfW := f.HalfArcsec()
	pitch := p.ArcsecPerU()
	within := func() (u, w float64) { return (2*rng.Float64() - 1) * halfU, (2*rng.Float64() - 1) * halfW }
	taken := map[[2]int]bool{}
	var list []instrument.StuckMirror
	for i := 0; len(list) < count; {
		var column, row int
		if i%10 == 9 {
			column, row = rng.IntN(p.DMD.Columns), rng.IntN(p.DMD.Rows)
		} else {
			u, w := within()
			if i%4 == 0 {
				at := StarPlaces[i/4%len(StarPlaces)]
				u, w = at[0]*halfU+2*pitch*(2*rng.Float64()-1), at[1]*halfW+2*pitch*(2*rng.Float64()-1)
			}
			column, row = nearestMirror(p, p.UCenter()+u/pitch, p.WCenter()+w/pitch)
		}
		at := [2]int{column, row}
		if column < 0 || column >= p.DMD.Columns || row < 0 || row >= p.DMD.Rows || taken[at] || i%10 == 9 && f.codes(column, row) {
			continue
		}
		taken[at] = true
		list = append(list, instrument.StuckMirror{Column: column, Row: row, On: i%2 == 0})
		i++
	}
	return p.SetStuck("stuck.csv", list)
}

// nearestMirror is the mirror nearest to a place.
func nearestMirror(p *instrument.Profile, u, w float64) (column, row int) {
	if p.DMD.Mounting == instrument.Diagonal {
		return int(math.Round((u - w) / 2)), int(math.Round((u + w) / 2))
	}
	return int(math.Round(u)), int(math.Round(w))
}

// codes tells whether a mirror lies in the field that elements make.
func (f *Field) codes(column, row int) bool {
	p := f.Profile
	u, w := float64(column), float64(row)
	if p.DMD.Mounting == instrument.Diagonal {
		u, w = float64(column+row), float64(row-column)
	}
	halfU, halfW := f.HalfArcsec()
	pitch := p.ArcsecPerU()
	return math.Abs(u-p.UCenter())*pitch < halfU+pitch && math.Abs(w-p.WCenter())*pitch < halfW+pitch
}

// Lacking tells of each element, by detector row, whether the light of a mirror that does
// not move is missing there, by 1 part in 1000 of the element's at least where its light
// is even: [row][element].
func Lacking(seq *sequence.Sequence) [][]bool {
	const least = 1e-3
	p := seq.Profile
	s := p.Spectrograph
	sigma := s.LSFFWHMPx / 2.3548
	lacking := make([][]bool, p.Detector.Rows)
	for y := range lacking {
		lacking[y] = make([]bool, seq.N())
		for _, m := range seq.StuckMirrors() {
			if !m.Coded() {
				continue
			}
			d := float64(y) - s.YCenterPx - s.WStepPx*(float64(m.W)-p.WCenter())
			part := math.Exp(-d*d/(2*sigma*sigma)) / (sigma * math.Sqrt(2*math.Pi)) * math.Abs(s.WStepPx)
			if mirrors := float64(seq.ElementMirrors()); part/mirrors > least {
				lacking[y][m.Element] = true
			}
		}
	}
	return lacking
}

// StuckPulls are the pulls of a cube with its truth where light of mirrors that do not
// move is missing (Lacking), those among them where the truth is brighter than 5 sigma,
// and those of all other voxels.
type StuckPulls struct{ Lacking, Bright, Others Moments }

// NewStuckPulls compares a cube with its truth; scale multiplies VARIANCE.
func NewStuckPulls(c *Cube, truth []float32, seq *sequence.Sequence, scale float64) *StuckPulls {
	lacking := Lacking(seq)
	n := seq.N()
	p := new(StuckPulls)
	for i, t := range truth {
		if !c.Good(i) || t != t {
			continue
		}
		sigma := math.Sqrt(scale * float64(c.Variance[i]))
		pull := float64(c.Signal[i]-t) / sigma
		if !lacking[i/n%seq.Profile.Detector.Rows][i%n] {
			p.Others.Add(pull)
			continue
		}
		p.Lacking.Add(pull)
		if float64(t) > 5*sigma {
			p.Bright.Add(pull)
		}
	}
	return p
}

// Merge takes the pulls of another night.
func (p *StuckPulls) Merge(o *StuckPulls) {
	p.Lacking.Merge(o.Lacking)
	p.Bright.Merge(o.Bright)
	p.Others.Merge(o.Others)
}

// Findings judge the pulls: within 0.05 of 0 and 1 where light is missing, and as on a
// calibrated night elsewhere. bright tells whether there are bright voxels enough to
// judge: the mean of those may be off by 0.1, since a star within an element of six
// mirrors has structure that no neighbour tells (0.07 measured).
func (p *StuckPulls) Findings(name string, bright bool) []Finding {
	figure := pullFigure{mean: 0.05, std: 0.05}
	list := figure.judge(name+", light of stuck mirrors missing", &p.Lacking)
	if bright {
		figure.mean = 0.1
		list = append(list, figure.judge(name+", the same, above 5 sigma", &p.Bright)...)
	}
	return append(list, calibrated.judge(name+", all other voxels", &p.Others)...)
}

// StuckPullsOf compares nights with the truth of the noisy one.
func (n *Night) StuckPullsOf(scale float64, names ...string) (*StuckPulls, error) {
	all := new(StuckPulls)
	for _, name := range names {
		c, err := ReadCube(n.CubePath(name))
		if err != nil {
			return nil, err
		}
		truth, err := c.ReadTruth(n.TruthPath(Noisy))
		if err != nil {
			return nil, err
		}
		all.Merge(NewStuckPulls(c, truth, n.Seq, scale))
	}
	return all, nil
}
