package reduce

import (
	"errors"
	"fmt"
	"io/fs"
	"math"
	"path/filepath"
	"strings"

	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/register"
)

// StarsRecipe rules the cube's place on the sky: the sequence's, or that which listed
// stars say.
type StarsRecipe struct {
	// Use is off, or a CSV table of stars with the columns name, ra_deg, dec_deg.
	Use string `yaml:"use"`
	// Fit is pointing or similarity: see package register.
	Fit string `yaml:"fit" config:"optional"`
	// SearchArcsec is how far the telescope may have pointed from where it was asked to.
	SearchArcsec float64 `yaml:"search_arcsec" config:"optional"`
}

// SetDefaults gives the options their defaults.
func (s *StarsRecipe) SetDefaults() {
	*s = StarsRecipe{Use: useOff, Fit: register.Pointing, SearchArcsec: register.DefaultSearchArcsec}
}

func (s *StarsRecipe) check(c *config.Checks) {
	c.That(s.Use == useOff || strings.HasSuffix(s.Use, ".csv"), "stars.use",
		"%q is unknown; use off, or a table of stars (.csv) with the columns name, ra_deg, dec_deg", s.Use)
	c.OneOf("stars.fit", s.Fit, register.Pointing, register.Similarity)
	c.Within("stars.search_arcsec", s.SearchArcsec, 0.1, 3600)
}

// starSearch is what the cube's place on the sky is learned from.
type starSearch struct {
	list    []register.Star
	picture *register.Picture // in white light; nil where no stars are listed
	report  *product.Stars
}

// readStars reads the table that the recipe names, before any work is done.
func (r *reduction) readStars() error {
	recipe := r.opts.Recipe.Stars
	if recipe.Use == useOff {
		return nil
	}
	if !r.opts.Cube {
		return fmt.Errorf("%s: stars are looked for in the cube, which is not asked for; ask for it with --products cube, or say `stars: {use: off}`", r.opts.Recipe.Name)
	}
	var err error
	if r.stars.list, err = register.ReadStars(recipe.Use); err != nil {
		return err
	}
	s := product.NewSchema(r.seq)
	margin := recipe.SearchArcsec
	if recipe.Fit == register.Similarity {
		margin += 3600 * math.Hypot(float64(s.Elements)*s.C1Deg, float64(s.Rows)*s.C2Deg) / 2
	}
	if err := register.CheckField(recipe.Use, r.stars.list, s, margin); err != nil {
		return err
	}
	r.forgetPicture()
	return nil
}

// forgetPicture begins the picture anew, where stars are listed.
func (r *reduction) forgetPicture() {
	if r.opts.Recipe.Stars.Use != useOff {
		s := product.NewSchema(r.seq)
		r.stars.picture = register.NewPicture(s.Elements, s.Rows)
	}
}

// blind are the flags of voxels whose light says nothing. What all voxels share, unknown
// wavelengths or an unknown response, does not hide a star.
const blind = product.FlagBad &^ (product.FlagNominalWave | product.FlagLowFlat)

// look adds a strip of the cube to the picture.
func (s *starSearch) look(out *outStrip, shape shape) {
	if s.picture == nil {
		return
	}
	for l := range shape.voxels {
		for row := range out.h {
			at := (l*out.h + row) * shape.elements
			for j := range shape.elements {
				if out.flags[at+j]&blind == 0 {
					s.picture.Add(j, out.y0+row, float64(out.signal[at+j]), float64(out.variance[at+j]))
				}
			}
		}
	}
}

// findStars corrects the cube's place on the sky, and writes the registration of the device.
// Stars that are not found are a reason why the product is not whole.
func (r *reduction) findStars() error {
	if r.stars.picture == nil {
		return nil
	}
	recipe := r.opts.Recipe.Stars
	r.stars.picture.Finish()
	found, err := register.Solve(r.stars.picture, r.schema, r.stars.list, recipe.Use, register.Rule{Fit: recipe.Fit, SearchArcsec: recipe.SearchArcsec})
	if err != nil {
		r.degrade("the place on the sky is the sequence's and no star's: %s: %v", recipe.Use, err)
		return nil
	}
	r.stars.report = &found.Report
	for _, s := range found.Report.Stars {
		if !s.Used {
			r.warn("the star %s of %s was not used: %s", s.Name, recipe.Use, s.Why)
		}
	}
	if err := r.writeRegistration(found); err != nil {
		return err
	}
	r.schema = found.Schema
	return r.revisePlace()
}

// revisePlace writes it to the headers of all images that have a place on the sky.
func (r *reduction) revisePlace() error {
	for image := range product.ScaleImage + 1 {
		for _, c := range r.schema.PlaceCards() {
			if err := r.cube.Revise(image, c.Key, c.Value); err != nil {
				return err
			}
		}
	}
	return nil
}

func (r *reduction) writeRegistration(found *register.Solution) error {
	p := r.seq.Profile
	first, last := 0, 0
	for _, e := range r.seq.Elements {
		switch e.Element {
		case 0:
			first = e.First
		case r.seq.N() - 1:
			last = e.Last
		}
	}
	if r.seq.N() == 1 {
		last = first + r.seq.ElementMirrors() - 1
	}
	d := register.Device{
		Profile: r.seq.ProfileName, SequenceSHA: r.seq.SHA,
		MiddleArcsec: (float64(first+last)/2 - p.UCenter()) * p.ArcsecPerU(),
	}
	before, err := register.Read(filepath.Join(r.opts.Sequence, register.File))
	switch {
	case err == nil:
		d.Before = before
	case !errors.Is(err, fs.ErrNotExist):
		return err
	}
	registration := found.Registration(r.schema, d)
	if registration == nil {
		r.warn("no %s is written: it takes three stars that agree, not on one line", register.File)
		return nil
	}
	return registration.Write(filepath.Join(r.opts.Out, register.File))
}
