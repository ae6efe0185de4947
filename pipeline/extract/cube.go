package extract

import (
	"errors"
	"fmt"
	"path/filepath"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

// ErrGrid marks a cube whose world coordinates are not as reduce writes them.
var ErrGrid = errors.New("extract cannot place its voxels on the detector")

// Cube is an open cube.fits. Its methods read what they need by offset; the cube is
// never held.
type Cube struct {
	file *fitsutil.File
	// members are the runs that it is made of, nil for the cube of one run: a combined
	// cube has images, sky and grid alone, what is to know of the detector is theirs.
	members []member
	// SHA identifies the cube: the SHA-256 of all its headers, whose DATASUM cards
	// stand for the data.
	SHA                        string
	Elements, Rows             int
	Grid                       instrument.Grid
	Frame                      product.SpectralFrame // to which the grid's wavelengths belong
	observed                   bool                  // Frame has an observer's velocity
	edges, centres             calib.Wavelengths     // of the voxels
	Unit                       string                // BUNIT of SIGNAL
	signal, variance, flags    *fitsutil.Image
	pixelVariance              *fitsutil.Image
	slitResponse, bandResponse *fitsutil.Image // nil without a response
	sky                        *sky
	onSky                      *onSky
	geometry                   calib.Geometry
	noise                      *product.Noise
	erased                     *erasures // nil where no sample was restored
	decoder                    *hadamard.Decoder
	columns                    []int     // code column of each element
	weight                     []float64 // 1/frames of each code row
	sumWeight                  float64
	shift                      *calib.RowShift
	field                      *calib.ShiftField // nil where light is taken from its own place
	resampler                  *calib.Resampler
	bandFactor, bandVariance   []float32   // [wavelength][element]; nil without a response
	cached                     *cachedRows // nil where voxels come from the images
}

// Open opens the cube of a run: a folder that reduce or combine wrote, or its cube.fits.
// The runs of a combined cube have to be where they were, seen from it. The errors name
// the file and the cure.
func Open(run string) (*Cube, error) {
	path := run
	if filepath.Ext(run) != ".fits" {
		path = filepath.Join(run, product.CubeFile)
	}
	file, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	c := &Cube{file: file}
	if err := c.read(); err != nil {
		c.Close() // only read from
		return nil, err
	}
	return c, nil
}

// WithLight is c with the light of SIGNAL in another file on the same grid, such as a
// model or the truth of a rehearsal, and c's variances. Both files stay to be closed. Of a
// combined cube the light of the runs, by which errors of responses go, stays theirs.
func (c *Cube) WithLight(f *fitsutil.File) (*Cube, error) {
	im, err := f.ImageNamed(product.Signal)
	if err != nil {
		return nil, err
	}
	if !slices.Equal(im.Axes, c.signal.Axes) {
		return nil, fmt.Errorf("%s has the axes %v, the cube %v", f.Path(), im.Axes, c.signal.Axes)
	}
	other := *c
	other.signal, other.cached = im, nil
	return &other, nil
}

// Close ends the use of the cube.
func (c *Cube) Close() error {
	err := c.file.Close()
	for _, m := range c.members {
		err = errors.Join(err, m.Close())
	}
	return err
}

// Runs is the number of runs that the cube is made of, 1 unless it was combined.
func (c *Cube) Runs() int { return len(c.runs()) }

// Path is the name of the cube's file.
func (c *Cube) Path() string { return c.file.Path() }

// Position is the place on the sky of an element and row, from 0.
func (c *Cube) Position(element, row float64) Position { return c.sky.position(element, row) }

func (c *Cube) read() error {
	if err := c.readImages(); err != nil {
		return err
	}
	made, err := product.ReadMembers(c.file)
	if err != nil {
		return err
	}
	if made != nil {
		return c.openMembers(made)
	}
	return c.readRun()
}

// readImages reads what every cube has.
func (c *Cube) readImages() (err error) {
	c.SHA = product.Identify(c.file)
	for _, im := range []struct {
		name string
		to   **fitsutil.Image
	}{
		{product.Signal, &c.signal}, {product.Variance, &c.variance}, {product.FlagsImage, &c.flags},
	} {
		if *im.to, err = c.file.ImageNamed(im.name); err != nil {
			return err
		}
		if len((*im.to).Axes) != 3 || !slices.Equal((*im.to).Axes, c.signal.Axes) {
			return c.fault("image %s has the axes %v", im.name, (*im.to).Axes)
		}
	}
	c.Elements, c.Rows = c.signal.Width(), c.signal.Height()
	if c.Unit, err = c.signal.Header.Str("BUNIT"); err != nil {
		return err
	}
	if c.sky, err = readSky(c.signal.Header); err != nil {
		return fmt.Errorf("%s: %w", c.Path(), err)
	}
	return c.readGrid()
}

// readRun reads what the cube of one run has besides.
func (c *Cube) readRun() (err error) {
	if err := c.readOnSky(); err != nil {
		return err
	}
	if c.noise, err = product.ReadNoise(c.file); err != nil {
		return err
	}
	if c.pixelVariance, err = c.file.ImageNamed(product.PixelVariance); err != nil {
		return err
	}
	if err := c.readResponse(); err != nil {
		return err
	}
	if err := c.readCode(); err != nil {
		return err
	}
	if err := c.readErasures(); err != nil {
		return err
	}
	return c.readGeometry()
}

// fault is an error of a file that reduce did not write as it does now.
func (c *Cube) fault(format string, args ...any) error {
	return fmt.Errorf("%s: %s; make the cube again with reduce", c.Path(), fmt.Sprintf(format, args...))
}

// Cards of a combined cube: VELOSYS is left out where its runs differ in it.
const (
	observerVelocity = "VELOSYS"
	runsCard         = "NRUNS"
)

func (c *Cube) readGrid() error {
	h := c.signal.Header
	if h.Has(observerVelocity) || !c.file.HDUs()[0].Header.Has(runsCard) {
		c.observed = true
	} else {
		// The runs of a combined cube have observers of their own: see their cubes.
		h = h.Clone()
		if err := h.Set(observerVelocity, 0.0, ""); err != nil {
			return err
		}
	}
	s, err := product.ReadSchema(h, c.signal.Axes)
	if err != nil {
		return fmt.Errorf("%s: %w: %w", c.Path(), err, ErrGrid)
	}
	c.Grid, c.Frame = s.Grid, s.Frame
	axis := c.axis()
	c.edges, c.centres = c.edgesOf(0, axis.Grid.Count), calib.NewWavelengths(axis.ObservedNM, axis.EvenStepNM(), 0, axis.Grid.Count)
	return nil
}

func (c *Cube) axis() product.SpectralAxis { return product.SpectralAxis{Grid: c.Grid, Frame: c.Frame} }

// edgesOf are the edges of voxels from..to-1, one more than voxels.
func (c *Cube) edgesOf(from, to int) calib.Wavelengths {
	axis := c.axis()
	return calib.NewWavelengths(axis.ObservedNM, axis.EvenStepNM(), float64(from)-0.5, to-from+1)
}

// readResponse reads BANDRESP whole: it is as large as a row of the cube.
func (c *Cube) readResponse() (err error) {
	if !c.noise.Response {
		return nil
	}
	if c.slitResponse, err = c.file.ImageNamed(product.SlitResponse); err != nil {
		return err
	}
	if c.bandResponse, err = c.file.ImageNamed(product.BandResponse); err != nil {
		return err
	}
	n := c.Elements * c.Grid.Count
	if s, b := c.slitResponse, c.bandResponse; s.Width() != c.Elements || s.Height() != c.Rows || s.Planes() != 2 ||
		b.Width() != c.Elements || b.Height() != c.Grid.Count || b.Planes() != 2 {
		return c.fault("the responses have the axes %v and %v", s.Axes, b.Axes)
	}
	c.bandFactor, c.bandVariance = make([]float32, n), make([]float32, n)
	if err := c.bandResponse.ReadPlaneRows(c.bandFactor, 0, 0, c.Grid.Count); err != nil {
		return err
	}
	return c.bandResponse.ReadPlaneRows(c.bandVariance, 1, 0, c.Grid.Count)
}

func (c *Cube) readCode() error {
	code, err := hadamard.New(hadamard.Family(c.noise.Family), c.noise.V)
	if err != nil {
		return fmt.Errorf("%s: %w", c.Path(), err)
	}
	if code.Poly() != c.noise.Poly {
		return c.fault("the code's polynomial is %d, here %d", c.noise.Poly, code.Poly())
	}
	c.decoder = hadamard.NewDecoder(code)
	c.columns = make([]int, c.Elements)
	found := 0
	for column, j := range c.noise.Element {
		if int(j) >= c.Elements {
			return c.fault("table %s names element %d of %d", product.Code, j, c.Elements)
		}
		if j >= 0 {
			c.columns[j] = column
			found++
		}
	}
	if found != c.Elements {
		return c.fault("table %s names %d elements of %d", product.Code, found, c.Elements)
	}
	c.weight = make([]float64, c.noise.V)
	for i, n := range c.noise.Frames {
		c.weight[i] = 1 / float64(max(n, 1)) // a lost row was given the others' mean
		c.sumWeight += c.weight[i]
	}
	return nil
}

func (c *Cube) readGeometry() error {
	var header *fitsutil.Header
	for _, u := range c.file.HDUs() {
		if u.Name == product.Dispersion {
			header = u.Header
		}
	}
	if header == nil {
		return c.fault("it has no table %s", product.Dispersion)
	}
	if err := product.ReadGeometry(header, c.geometry.Parameters()); err != nil {
		return err
	}
	if err := c.geometry.Check(c.noise.Columns, c.noise.Rows, c.axis().FirstNM(), c.axis().LastNM()); err != nil {
		return fmt.Errorf("%s: %w", c.Path(), err)
	}
	if c.noise.Rows != c.Rows || c.pixelVariance.Planes() != 2 {
		return c.fault("image %s has the axes %v", product.PixelVariance, c.pixelVariance.Axes)
	}
	shift := make([]float64, c.noise.Columns)
	for x := range shift {
		shift[x] = c.geometry.TraceShift(float64(x))
	}
	var err error
	if c.shift, err = calib.NewRowShift(shift, c.Rows); err != nil {
		return err
	}
	if err := c.readShift(shift); err != nil {
		return err
	}
	c.resampler, err = calib.NewResampler(0, c.noise.Columns-1)
	return err
}

// slitRow reads a row of SLITRESP, factor or variance; nil without a response.
func (c *Cube) slitRow(plane, y int) ([]float32, error) {
	if c.slitResponse == nil {
		return nil, nil
	}
	row := make([]float32, c.Elements)
	return row, c.slitResponse.ReadPlaneRows(row, plane, y, y+1)
}
