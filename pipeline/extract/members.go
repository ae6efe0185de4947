package extract

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// A combined cube is the mean of runs with the shares o_iv = (1/V_i)/sum(1/V) of run i in
// voxel v, over the runs in which the voxel is good: its VARIANCE over that of the run. A
// sum over its voxels is the sum over the runs of w_v o_iv S_iv, and, the runs being
// independent, its variance the sum of what each run gives for the weights w_v o_iv.

// member is a run of a combined cube; for the cube of one run, that cube.
type member struct {
	*Cube
	// element and row are where its first voxel lies in the combined cube.
	element, row int
}

// runs are those that the cube is made of.
func (c *Cube) runs() []member {
	if c.members == nil {
		return []member{{Cube: c}}
	}
	return c.members
}

// place is where an element and row of the combined cube are in the run, if they are.
func (m member) place(element, row int) (j, y int, there bool) {
	j, y = element-m.element, row-m.row
	return j, y, j >= 0 && j < m.Elements && y >= 0 && y < m.Rows
}

// openMembers opens the runs of a combined cube.
func (c *Cube) openMembers(list product.Members) error {
	for _, r := range list {
		m, err := c.openMember(r)
		if err != nil {
			return err
		}
		c.members = append(c.members, member{m, r.Element, r.Row})
		if j, y := r.Element+m.Elements, r.Row+m.Rows; r.Element < 0 || r.Row < 0 || j > c.Elements || y > c.Rows || m.Grid.Count != c.Grid.Count {
			return fmt.Errorf("%s: the voxels of run %s do not lie in it as table %s says; combine the runs again", c.Path(), r.Path, product.MembersTable)
		}
	}
	return nil
}

// openMember opens a run where the combined cube says that it is, if it is still the same.
func (c *Cube) openMember(r product.Member) (*Cube, error) {
	path := filepath.Join(filepath.Dir(c.Path()), r.Path, product.CubeFile)
	file, err := fitsutil.Open(path)
	if err != nil {
		return nil, fmt.Errorf("%s is made of the run %s, by which the errors of sums are known: %w; put the run back, or combine the runs again", c.Path(), filepath.Dir(path), err)
	}
	m := &Cube{file: file}
	if product.Identify(file) != r.SHA {
		err = fmt.Errorf("%s is made of the run %s as it was, but that has another cube now; combine the runs again", c.Path(), filepath.Dir(path))
	} else if err = m.readImages(); err == nil {
		err = m.readRun()
	}
	if err != nil {
		file.Close() // only read from
		return nil, err
	}
	return m, nil
}

// share of a run in a voxel that is good in it, by the VARIANCE of the mean and its own.
func share(mean, own float32) float64 { return float64(mean) / float64(own) }

// apertureIn is the part of an aperture that a run has, with the weights of its voxels in
// the sum; nil where it has none.
func (m member) apertureIn(ctx context.Context, a *aperture) (*aperture, error) {
	var cells []cell
	var from []int
	for i, k := range a.cells {
		var there bool
		if k.element, k.row, there = m.place(k.element, k.row); there {
			cells, from = append(cells, k), append(from, i)
		}
	}
	if len(cells) == 0 {
		return nil, nil
	}
	own, err := m.load(ctx, cells)
	if err != nil {
		return nil, err
	}
	for i, at := range from {
		for l, w := range a.weight[at] {
			if w != 0 && own.good(i, l) {
				own.weight[i][l] = w * share(a.variance[at][l], own.variance[i][l])
			}
		}
	}
	return own, nil
}

// carryMembers adds up what the runs of a combined cube give.
func (c *Cube) carryMembers(ctx context.Context, a *aperture, sums [][]float64, sumsOnly bool) (*covariances, error) {
	out := newCovariances(c.Grid.Count, len(sums))
	for _, m := range c.members {
		own, err := m.apertureIn(ctx, a)
		if err != nil {
			return nil, err
		}
		if own == nil {
			continue
		}
		v, err := m.carry(ctx, own, sums, sumsOnly)
		if err != nil {
			return nil, err
		}
		out.add(v)
	}
	return out, nil
}
