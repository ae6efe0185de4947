package demo

import (
	"fmt"
	"math"
	"slices"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// Agreement compares a cube with its truth. A pull is (cube - truth)/sigma of a
// good voxel, sigma the root of its VARIANCE.
type Agreement struct {
	// Voxels counts all voxels, Good those whose pulls were taken.
	Voxels int   `json:"voxels"`
	Good   int   `json:"good"`
	Pulls  Pulls `json:"pulls"`
	// ByCounts are the pulls in each decile of the counts of the detector pixels
	// that a voxel comes from, which VARIANCE grows with; BySignal those in each
	// decile of the voxel's own true signal.
	ByCounts [10]Pulls `json:"by_counts"`
	BySignal [10]Pulls `json:"by_signal"`
	// Flux is the sum of the cube over that of the truth, good voxels.
	Flux float64 `json:"flux"`
}

// Pulls are the moments of a set of pulls.
type Pulls struct {
	N    int     `json:"n"`
	Mean float64 `json:"mean"`
	Std  float64 `json:"std"`
}

// moments adds up a set of pulls.
type moments struct {
	n           int
	sum, square float64
}

func (m *moments) add(p float64) {
	m.n++
	m.sum += p
	m.square += p * p
}

func (m *moments) pulls() Pulls {
	if m.n == 0 {
		return Pulls{}
	}
	mean := m.sum / float64(m.n)
	return Pulls{N: m.n, Mean: mean, Std: math.Sqrt(max(0, m.square/float64(m.n)-mean*mean))}
}

// Compare reads cube.fits and the truth.fits of the same grid, plane by plane.
func Compare(cubePath, truthPath string) (*Agreement, error) {
	c, err := openComparison(cubePath, truthPath)
	if err != nil {
		return nil, err
	}
	defer c.close()
	variances, signals, err := c.quantiles()
	if err != nil {
		return nil, err
	}
	var (
		all                moments
		byCounts, bySignal [10]moments
		cubeSum, truthSum  float64
		a                  Agreement
	)
	err = c.each(func(signal, variance, truth float64) {
		pull := (signal - truth) / math.Sqrt(variance)
		all.add(pull)
		byCounts[decile(variances, variance)].add(pull)
		bySignal[decile(signals, truth)].add(pull)
		cubeSum += signal
		truthSum += truth
	})
	if err != nil {
		return nil, err
	}
	a.Voxels, a.Good = c.voxels(), all.n
	a.Pulls, a.Flux = all.pulls(), cubeSum/truthSum
	for i := range byCounts {
		a.ByCounts[i], a.BySignal[i] = byCounts[i].pulls(), bySignal[i].pulls()
	}
	return &a, nil
}

func decile(edges []float64, x float64) int {
	i, _ := slices.BinarySearch(edges, x)
	return min(i, 9)
}

// comparison is a cube beside its truth.
type comparison struct {
	files                          [2]*fitsutil.File
	signal, variance, flags, truth *fitsutil.Image
}

func openComparison(cubePath, truthPath string) (_ *comparison, err error) {
	c := new(comparison)
	defer func() {
		if err != nil {
			c.close()
		}
	}()
	for i, path := range []string{cubePath, truthPath} {
		if c.files[i], err = fitsutil.Open(path); err != nil {
			return nil, err
		}
	}
	for _, im := range []struct {
		to   **fitsutil.Image
		file int
		name string
	}{
		{&c.signal, 0, product.Signal}, {&c.variance, 0, product.Variance},
		{&c.flags, 0, product.FlagsImage}, {&c.truth, 1, product.Signal},
	} {
		if *im.to, err = c.files[im.file].ImageNamed(im.name); err != nil {
			return nil, err
		}
	}
	if !slices.Equal(c.signal.Axes, c.truth.Axes) {
		return nil, fmt.Errorf("%s has axes %v and %s has %v; compare a cube with the truth of its own grid", cubePath, c.signal.Axes, truthPath, c.truth.Axes)
	}
	return c, nil
}

func (c *comparison) close() {
	for _, f := range c.files {
		if f != nil {
			f.Close() // only read from
		}
	}
}

func (c *comparison) voxels() int { return c.signal.Width() * c.signal.Height() * c.signal.Planes() }

// each visits the good voxels for which there is a truth, in order.
func (c *comparison) each(visit func(signal, variance, truth float64)) error {
	n := c.signal.Width() * c.signal.Height()
	images := [4]*fitsutil.Image{c.signal, c.variance, c.flags, c.truth}
	var planes [4][]float32
	for i := range planes {
		planes[i] = make([]float32, n)
	}
	for l := range c.signal.Planes() {
		for i, im := range images {
			if err := im.ReadPlaneRows(planes[i], l, 0, im.Height()); err != nil {
				return err
			}
		}
		for p, flag := range planes[2] {
			truth := float64(planes[3][p])
			if int16(flag)&product.FlagBad != 0 || math.IsNaN(truth) {
				continue
			}
			visit(float64(planes[0][p]), float64(planes[1][p]), truth)
		}
	}
	return nil
}

// quantiles gives the nine inner decile edges of variance and true signal, of
// every seventh good voxel: they need not be sharper.
func (c *comparison) quantiles() (variances, signals []float64, err error) {
	var v, s []float64
	i := 0
	err = c.each(func(_, variance, truth float64) {
		if i++; i%7 == 0 {
			v, s = append(v, variance), append(s, truth)
		}
	})
	if err == nil && len(v) < 10 {
		err = fmt.Errorf("only %d good voxels have a truth: too few to compare", i)
	}
	if err != nil {
		return nil, nil, err
	}
	return edges(v), edges(s), nil
}

func edges(x []float64) []float64 {
	slices.Sort(x)
	e := make([]float64, 9)
	for i := range e {
		e[i] = x[(i+1)*len(x)/10]
	}
	return e
}
