package reduce

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// create lays out the products.
func (r *reduction) create(s shape) error {
	primary, err := r.primary()
	if err != nil {
		return err
	}
	if s.cube {
		images, err := r.cubeImages(product.OnSky{})
		if err != nil {
			return err
		}
		if r.cube, err = fitsutil.CreateCube(r.cubePath(), primary.Clone(), images); err != nil {
			return err
		}
		r.cube.CountInto(&r.traffic)
	}
	if s.elementCube {
		images, err := product.ElementImages(s.columns, s.rows, s.slots)
		if err != nil {
			return err
		}
		if r.element, err = fitsutil.CreateCube(r.elementsPath(), primary.Clone(), images); err != nil {
			return err
		}
		r.element.CountInto(&r.traffic)
	}
	return nil
}

// primary is the primary header of the products.
func (r *reduction) primary() (*fitsutil.Header, error) {
	return product.Provenance{
		ProfileName: r.seq.ProfileName, ProfileSHA: r.seq.ProfileSHA, SequenceSHA: r.seq.SHA, RecipeSHA: r.opts.Recipe.SHA,
		FramesUsed: r.roles.science, FramesLost: len(r.roles.missing),
	}.Primary(r.seq.Target.Name)
}

// cubeImages are those of cube.fits once that was done to it.
func (r *reduction) cubeImages(done product.OnSky) ([]fitsutil.ImageSpec, error) {
	images, err := r.schema.ImagesOnSky(done)
	if err != nil {
		return nil, err
	}
	more, err := r.noiseImages()
	if err != nil {
		return nil, err
	}
	images = append(images, more...)
	if done.Sky != nil {
		images = append(images, fitsutil.ImageSpec{Name: product.SkyShare, BITPIX: -32, Axes: []int{r.schema.Elements, r.schema.Rows, 2}})
	}
	return images, nil
}

// judge turns flags that were set into reasons why the product is not whole.
func (r *reduction) judge(flags int16) {
	if flags&product.FlagSaturated != 0 {
		r.roles.degraded = append(r.roles.degraded, fmt.Sprintf("%d pixels are saturated in more science frames than can be restored, and the voxels they reach are flagged SATURATED; shorten the dwell", r.quality.Saturated))
	}
}

// finish appends the tables and gives every product its name.
func (r *reduction) finish(context.Context) (int64, error) {
	if err := r.findStars(); err != nil {
		return 0, err
	}
	noteCycles(r.night.Ledger, r.seq, r.opts.Cycles)
	r.roles.fillLedger(r.night.Ledger, r.album.Frames, r.seq, r.camera.Columns*r.camera.Rows)
	if r.cube != nil {
		if err := r.cube.AppendTable(r.night.Ledger.Table()); err != nil {
			return 0, err
		}
		table, err := dispersionTable(r.rectifier.geometry, r.optics.arcs, r.usage, r.camera.Columns)
		if err != nil {
			return 0, err
		}
		if err := r.cube.AppendTable(table); err != nil {
			return 0, err
		}
		if err := r.finishNoise(); err != nil {
			return 0, err
		}
		if err := r.finishOnSky(); err != nil {
			return 0, err
		}
		if err := r.finishShift(); err != nil {
			return 0, err
		}
		if err := r.finishRestored(); err != nil {
			return 0, err
		}
		if err := r.cube.Commit(); err != nil {
			return 0, err
		}
	}
	if r.element != nil {
		if err := r.element.Commit(); err != nil {
			return 0, err
		}
	}
	if err := fitsutil.WriteAtomic(filepath.Join(r.opts.Out, product.LedgerFile), r.night.Ledger.WriteCSV); err != nil {
		return 0, err
	}
	return r.finishBytes()
}
