package trial

import (
	"fmt"
	"math"
	"slices"

	"mirrorloom/pipeline/sequence"
)

// Moments add up samples.
type Moments struct {
	N           int
	sum, square float64
}

// Add takes a sample.
func (m *Moments) Add(x float64) {
	m.N++
	m.sum += x
	m.square += x * x
}

// Mean is that of the samples.
func (m *Moments) Mean() float64 { return m.sum / float64(m.N) }

// Std is their standard deviation.
func (m *Moments) Std() float64 {
	mean := m.Mean()
	return math.Sqrt(max(0, m.square/float64(m.N)-mean*mean))
}

// Merge takes the samples of another set.
func (m *Moments) Merge(o Moments) {
	m.N += o.N
	m.sum += o.sum
	m.square += o.square
}

// Pulls are (cube - truth)/sigma of the good voxels, sigma the root of VARIANCE.
type Pulls struct {
	All Moments
	// ByCounts are those in each decile of the counts of the detector pixels that
	// a voxel comes from.
	ByCounts [10]Moments
}

// NewPulls compares a cube with its truth. counts rises with the expected counts
// of a voxel's pixels: VARIANCE of the twin. That of the cube itself would not
// do on a faint night: it has noise, and a decile of voxels that by chance have
// a small one has large pulls.
//
// scale multiplies VARIANCE: a test of the test.
func NewPulls(c *Cube, truth, counts []float32, scale float64) (*Pulls, error) {
	edges, err := decileEdges(c, truth, counts)
	if err != nil {
		return nil, err
	}
	p := new(Pulls)
	for i, t := range truth {
		if !usable(c, truth, counts, i) {
			continue
		}
		pull := float64(c.Signal[i]-t) / math.Sqrt(scale*float64(c.Variance[i]))
		p.All.Add(pull)
		at, _ := slices.BinarySearch(edges, counts[i])
		p.ByCounts[min(at, 9)].Add(pull)
	}
	return p, nil
}

// Merge takes the pulls of another night of the same field.
func (p *Pulls) Merge(o *Pulls) {
	p.All.Merge(o.All)
	for i := range p.ByCounts {
		p.ByCounts[i].Merge(o.ByCounts[i])
	}
}

// usable leaves out voxels without a truth or counts, which are not numbers where
// the twin has no data.
func usable(c *Cube, truth, counts []float32, i int) bool {
	return c.Good(i) && truth[i] == truth[i] && counts[i] == counts[i]
}

// decileEdges are the nine inner edges of counts over the good voxels.
func decileEdges(c *Cube, truth, counts []float32) ([]float32, error) {
	var all []float32
	for i := range truth {
		if usable(c, truth, counts, i) {
			all = append(all, counts[i])
		}
	}
	if len(all) < 1000 {
		return nil, fmt.Errorf("%d good voxels are too few to compare", len(all))
	}
	slices.Sort(all)
	edges := make([]float32, 9)
	for k := range edges {
		edges[k] = all[(k+1)*len(all)/10]
	}
	return edges, nil
}

// pullFigure is how far mean and standard deviation of pulls may be from 0 and 1.
type pullFigure struct{ mean, std float64 }

var (
	// clean is the figure of section 11 of the design.
	clean = pullFigure{0.02, 0.03}
	// calibrated is that of an instrument which the night itself calibrates.
	calibrated = pullFigure{0.03, 0.05}
)

// Findings judge the pulls: mean within 0.02 of 0 and standard deviation within
// 0.03 of 1, over all good voxels and in each decile.
func (p *Pulls) Findings(name string) []Finding { return p.judge(name, clean) }

// CalibratedFindings are those of an imperfect instrument: within 0.03 and 0.05.
func (p *Pulls) CalibratedFindings(name string) []Finding { return p.judge(name, calibrated) }

// FaultyFindings judge the mean and the scatter of all pulls of a night with faults that
// were repaired, and the scatter in each decile of the counts: within 0.05.
func (p *Pulls) FaultyFindings(name string) []Finding {
	return p.judge(name, pullFigure{mean: 0.05, std: 0.05})
}

// Kurtosis is the fourth moment of pulls over the square of the second: 3 for a normal
// law.
type Kurtosis struct {
	N              int
	square, fourth float64
}

// Add takes the pulls of a cube's good voxels.
func (k *Kurtosis) Add(c *Cube, truth []float32) {
	for i, t := range truth {
		if !c.Good(i) || t != t {
			continue
		}
		d := float64(c.Signal[i] - t)
		square := d * d / float64(c.Variance[i])
		k.N++
		k.square += square
		k.fourth += square * square
	}
}

// Value is the kurtosis.
func (k *Kurtosis) Value() float64 { return k.fourth / k.square * float64(k.N) / k.square }

func (p *Pulls) judge(name string, figure pullFigure) []Finding {
	list := figure.judge(name+", all good voxels", &p.All)
	for i := range p.ByCounts {
		list = append(list, figure.judge(fmt.Sprintf("%s, decile %d of the counts", name, i+1), &p.ByCounts[i])...)
	}
	return list
}

func (f pullFigure) judge(what string, m *Moments) []Finding {
	n := m.N / 2 // resampled neighbours count half
	root := math.Sqrt(float64(n))
	return []Finding{
		Near(what+": mean pull", m.Mean(), 0, f.mean, 1/root, n),
		// The standard error of a standard deviation is 1/sqrt(2 n).
		Near(what+": standard deviation", m.Std(), 1, f.std, 1/(root*math.Sqrt2), n),
	}
}

// PullsOf compares the noisy night of a Pair with its truth.
func (n *Night) PullsOf(scale float64) (*Pulls, *Cube, error) { return n.PullsOfNight(Noisy, scale) }

// PullsOfNight compares the night named name with the truth of the noisy one, from
// which it differs in its seed.
func (n *Night) PullsOfNight(name string, scale float64) (*Pulls, *Cube, error) {
	c, err := ReadCube(n.CubePath(name))
	if err != nil {
		return nil, nil, err
	}
	truth, err := c.ReadTruth(n.TruthPath(Noisy))
	if err != nil {
		return nil, nil, err
	}
	twin, err := ReadCube(n.CubePath(Twin))
	if err != nil {
		return nil, nil, err
	}
	p, err := NewPulls(c, truth, twin.Variance, scale)
	return p, c, err
}

// GoodFindings judge how many voxels are good: 99 % of those in coded rows whose
// wavelength falls on the detector, and `all` of all; 0 to state that part only.
func GoodFindings(name string, c *Cube, seq *sequence.Sequence, all float64) []Finding {
	covered := Covered(seq)
	var good, wanted, both int
	for i := range c.Flags {
		if c.Good(i) {
			good++
		}
		if covered(i) {
			wanted++
			if c.Good(i) {
				both++
			}
		}
	}
	ofAll, what := float64(good)/float64(len(c.Flags)), name+": good part of all voxels"
	total := Stated(what, ofAll, len(c.Flags))
	if all > 0 {
		total = AtLeast(what, ofAll, all, len(c.Flags))
	}
	return []Finding{AtLeast(name+": good part of the covered voxels", float64(both)/float64(wanted), 0.99, wanted), total}
}
