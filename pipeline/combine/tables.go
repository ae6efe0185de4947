package combine

import (
	"fmt"
	"path/filepath"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// primary is the primary header: what all runs have in common, and how many there are.
func (c *combination) primary() (*fitsutil.Header, error) {
	p := product.Provenance{
		ProfileName: c.common("PROFNAME"), ProfileSHA: c.common("PROFSHA"),
		SequenceSHA: c.common("SEQSHA"), RecipeSHA: c.common("RECSHA"),
	}
	for _, m := range c.members {
		p.FramesUsed += m.count("NFRAMES")
		p.FramesLost += m.count("NLOST")
	}
	h, err := p.Primary(c.schema.Object)
	if err != nil {
		return nil, err
	}
	return h, h.Set("NRUNS", len(c.members), "runs combined, see table "+product.MembersTable)
}

// several stands for a text in which the runs differ.
const several = "several"

func (c *combination) common(key string) string {
	text := c.members[0].card(key)
	for _, m := range c.members[1:] {
		if m.card(key) != text {
			return several
		}
	}
	return text
}

// images are those of the first run, with the place of the field's centre in the combined
// cube. The observer's velocity is left out where the runs differ in it.
func (c *combination) images() ([]fitsutil.ImageSpec, error) {
	axes := c.schema.Axes()
	var specs []fitsutil.ImageSpec
	for i, im := range c.members[0].images {
		h := im.Header.Clone()
		centre, err := h.Float("CRPIX1")
		if err != nil {
			return nil, err
		}
		row, err := h.Float("CRPIX2")
		if err != nil {
			return nil, err
		}
		first := c.members[0]
		if err := h.Set("CRPIX1", centre+float64(first.element), "element of the field's centre"); err != nil {
			return nil, err
		}
		if err := h.Set("CRPIX2", row+float64(first.row), "row of the field's centre"); err != nil {
			return nil, err
		}
		if c.common("VELOSYS") == several {
			h.Delete("VELOSYS")
		}
		specs = append(specs, fitsutil.ImageSpec{Name: imageNames[i], Header: h, BITPIX: im.BITPIX, Axes: axes})
	}
	return specs, nil
}

// runs is the table RUNS. Paths are as seen from the folder that is written.
func (c *combination) runs() (product.Members, error) {
	out, err := filepath.Abs(c.opts.Out)
	if err != nil {
		return nil, fmt.Errorf("output folder %s: %w", c.opts.Out, err)
	}
	var list product.Members
	for i, m := range c.members {
		at, err := filepath.Abs(m.name)
		if err == nil {
			at, err = filepath.Rel(out, at)
		}
		if err != nil {
			return nil, fmt.Errorf("folder %s: %w", m.name, err)
		}
		r := product.Member{Path: at, SHA: product.Identify(m.file), Element: m.element, Row: m.row, Frames: m.count("NFRAMES"), Light: 1}
		if i > 0 {
			var all shared
			for _, row := range c.stream.light[i] {
				all.add(row)
			}
			r.Light, r.LightErr = all.ratio()
		}
		list = append(list, r)
	}
	return list, nil
}

// ledger is the ledgers of the runs, one behind the other, each file with its run's number.
func (c *combination) ledger() product.Ledger {
	var all product.Ledger
	for i, m := range c.members {
		for _, e := range m.ledger {
			if e.File != "" {
				e.File = fmt.Sprintf("%d/%s", i+1, e.File)
			}
			all = append(all, e)
		}
	}
	return all
}

// inputs are the runs' cubes; a cube's digest is that of its headers (product.Identify).
func (c *combination) inputs() []product.Input {
	var all []product.Input
	for i, m := range c.members {
		all = append(all, product.Input{File: filepath.Join(m.name, product.CubeFile), SHA256: c.list[i].SHA})
	}
	return all
}
