package trial

import (
	"fmt"
	"math"
	"math/rand/v2"
	"path/filepath"
	"slices"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Strike is a sample that a cosmic ray struck: detector pixel, code row, electrons.
type Strike struct {
	X, Y, CodeRow int
	Charge        float64
}

// StrikeCount says what became of strikes.
type StrikeCount struct {
	// Samples are those of the science frames.
	Samples int
	// Strong strikes are above eight standard errors of the charge that the dark columns
	// measure in their pixel; Restored and Flagged are those of them whose sample was
	// restored, or whose pixel is bad.
	Strong, Restored, Flagged int
	// Needless counts samples of good pixels that were restored and had not been struck.
	Needless int
}

// Add takes the counts of another night.
func (s *StrikeCount) Add(o StrikeCount) {
	s.Samples += o.Samples
	s.Strong += o.Strong
	s.Restored += o.Restored
	s.Flagged += o.Flagged
	s.Needless += o.Needless
}

// TrueStrikes are those that rehearse drew for the night named name.
func (n *Night) TrueStrikes(name string) ([]Strike, error) {
	truth, err := n.Faults(name)
	if err != nil {
		return nil, err
	}
	var all []Strike
	for i, f := range truth.Frames {
		if f.Kind != sequence.Science {
			continue
		}
		for h := range f.HitX {
			all = append(all, Strike{f.HitX[h], f.HitY[h], n.Seq.Steps[i].Row, f.HitE[h]})
		}
	}
	return all, nil
}

// Strike adds charges to the frames of the night named name: each sample of a science
// frame is struck with probability share, on its own, by a charge of the law.
func (n *Night) Strike(name string, share float64, law func(*rand.Rand) float64, seed uint64) ([]Strike, error) {
	var all []Strike
	for _, i := range n.Seq.StepsOf(sequence.Science) {
		random := rand.New(rand.NewPCG(seed, uint64(i)))
		path := filepath.Join(n.Frames(name), rehearse.FrameFile(n.Seq.Steps[i].Step))
		strikes, err := n.strikeFrame(path, share, law, random)
		if err != nil {
			return nil, err
		}
		for _, s := range strikes {
			s.CodeRow = n.Seq.Steps[i].Row
			all = append(all, s)
		}
	}
	return all, nil
}

func (n *Night) strikeFrame(path string, share float64, law func(*rand.Rand) float64, random *rand.Rand) ([]Strike, error) {
	file, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	im, err := file.FirstImage()
	if err != nil {
		return nil, err
	}
	width, height := im.Width(), im.Height()
	data := make([]float32, width*height)
	if err := im.ReadRows(data, 0, height); err != nil {
		return nil, err
	}
	d := &n.Seq.Profile.Detector
	var all []Strike
	for a, place := range d.Active() {
		x0, x1, y0, y1 := place.Raw.Bounds0()
		for y := y0; y < y1; y++ {
			for x := x0; x < x1; x++ {
				if random.Float64() >= share {
					continue
				}
				s := Strike{X: place.X0 + x - x0, Y: place.Y0 + y - y0, Charge: law(random)}
				at := &data[y*width+x]
				*at = float32(min(math.Round(float64(*at)+s.Charge/d.Amplifiers[a].GainEPerADU), d.SaturationADU-1))
				all = append(all, s)
			}
		}
	}
	image := &fitsutil.ImageData{Header: im.Header, Axes: []int{width, height}, Data: data}
	if err := fitsutil.WriteFile(path, nil, image); err != nil {
		return nil, fmt.Errorf("strike %s: %w", path, err)
	}
	return all, nil
}

// CountStruck compares the cube's table of restored samples and the element cube's flags
// with the strikes. Pixels of which keep is false, given the element cube's variances and
// their median, do not count; nil counts all.
func (n *Night) CountStruck(name string, strikes []Strike, keep func(variance, median float64) bool) (StrikeCount, error) {
	cube, err := fitsutil.Open(n.CubePath(name))
	if err != nil {
		return StrikeCount{}, err
	}
	defer cube.Close()
	table, err := product.ReadRestored(cube)
	if err != nil {
		return StrikeCount{}, err
	}
	variance, flags, err := n.elementPlane(name)
	if err != nil {
		return StrikeCount{}, err
	}
	sorted := slices.Clone(variance)
	slices.Sort(sorted)
	median := float64(sorted[len(sorted)/2])
	columns := n.Seq.Profile.Detector.Columns
	kept := func(x, y int) bool { return keep == nil || keep(float64(variance[y*columns+x]), median) }
	bad := func(x, y int) bool { return int(flags[y*columns+x])&product.FlagBad != 0 }
	var c StrikeCount
	for y := range len(variance) / columns {
		for x := range columns {
			if kept(x, y) {
				c.Samples += n.Seq.V
			}
		}
	}
	type sample struct{ x, y, row int }
	restored, struck := map[sample]bool{}, map[sample]bool{}
	for i := range table.X {
		restored[sample{int(table.X[i]), int(table.Y[i]), int(table.CodeRow[i])}] = true
	}
	v, g := float64(n.Seq.V), float64(len(n.Seq.DarkColumns()))
	for _, s := range strikes {
		at := sample{s.X, s.Y, s.CodeRow}
		struck[at] = true
		// An element's variance is 4v/(v+1)^2 of a sample's, a charge's (v+1)/g.
		sigma := math.Sqrt(float64(variance[s.Y*columns+s.X]) * (v + 1) * (v + 1) / (4 * v) * (v + 1) / g)
		if !kept(s.X, s.Y) || s.Charge < 8*sigma {
			continue
		}
		c.Strong++
		switch {
		case bad(s.X, s.Y):
			c.Flagged++
		case restored[at]:
			c.Restored++
		}
	}
	for at := range restored {
		if kept(at.x, at.y) && !struck[at] && !bad(at.x, at.y) {
			c.Needless++
		}
	}
	return c, nil
}

// elementPlane is VARIANCE and FLAGS of the element cube's first column.
func (n *Night) elementPlane(name string) (variance, flags []float32, err error) {
	file, err := fitsutil.Open(n.ElementsPath(name))
	if err != nil {
		return nil, nil, err
	}
	defer file.Close()
	d := &n.Seq.Profile.Detector
	for image, to := range map[string]*[]float32{"VARIANCE": &variance, "FLAGS": &flags} {
		im, err := file.ImageNamed(image)
		if err != nil {
			return nil, nil, err
		}
		*to = make([]float32, d.Columns*d.Rows)
		if err := im.ReadPlaneRows(*to, 0, 0, d.Rows); err != nil {
			return nil, nil, err
		}
	}
	return variance, flags, nil
}

// StruckFindings judge the counts: 99 % of strong strikes restored or flagged, fewer than
// 3 in a million samples restored without need. State says how many were flagged.
func (s StrikeCount) StruckFindings(name string) []Finding {
	strong := float64(max(1, s.Strong))
	needless := float64(s.Needless) / float64(max(1, s.Samples))
	return []Finding{
		AtLeast(name+": strong hits restored or flagged", float64(s.Restored+s.Flagged)/strong, 0.99, s.Strong),
		Stated(name+": strong hits flagged", float64(s.Flagged)/strong, s.Strong),
		Below(name+": samples restored without need", needless, 3e-6, s.Samples),
	}
}
