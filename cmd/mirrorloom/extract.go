package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"mirrorloom/pipeline/extract"
)

type extractOptions struct {
	circle, ellipse, polygon string
	elements, rows           string
	inVoxels                 bool
	annulus, background      string
	optimal                  bool
	band, continuum          string
	lines                    []float64
	free                     bool
	line                     extract.LineOptions
	output                   outputOptions
}

func (o *extractOptions) addFlags(f *pflag.FlagSet) {
	f.StringVar(&o.circle, "circle", "", `aperture: "RA DEC RADIUS"`)
	f.StringVar(&o.ellipse, "ellipse", "", `aperture: "RA DEC MAJOR MINOR PA", semi-axes and position angle`)
	f.StringVar(&o.polygon, "polygon", "", `aperture: "RA DEC RA DEC RA DEC ...", three corners or more`)
	f.StringVar(&o.elements, "elements", "", `aperture: elements such as "3-7,9", from 0, with --rows`)
	f.StringVar(&o.rows, "rows", "", "the aperture's rows, from 0")
	f.BoolVar(&o.inVoxels, "in-voxels", false, "positions are ELEMENT ROW, from 0, in place of RA DEC")
	f.StringVar(&o.annulus, "annulus", "", `take off the mean of a ring around the aperture: "INNER OUTER"`)
	f.StringVar(&o.background, "background", "", `take off the mean of a polygon: "RA DEC RA DEC RA DEC ..."`)
	f.BoolVar(&o.optimal, "optimal", false, "weigh voxels by the light's profile for the least error")
	f.StringVar(&o.band, "band", "", `light in a band of vacuum nm: "499.8-502.3"; an image of the field without an aperture`)
	f.StringVar(&o.continuum, "continuum", "", `side bands of the band's continuum: "495-498,504-507"`)
	f.Float64SliceVar(&o.lines, "lines", nil, "lines to fit, vacuum nm at rest, with commas; maps of the field without an aperture")
	f.BoolVar(&o.free, "free", false, "give each line a velocity and a width of its own")
	f.Float64Var(&o.line.WindowNM, "window", 0, fmt.Sprintf("fit so many nm beyond the lines; 0 for %d voxels", extract.DefaultWindowVoxels))
	f.Float64Var(&o.line.VelocityKmS, "velocity", 0, "search lines around this velocity, km/s")
	f.Float64Var(&o.line.RangeKmS, "velocity-range", extract.DefaultRangeKmS, "and so far on both sides, km/s")
	f.Float64Var(&o.line.MinSN, "min-sn", extract.DefaultMinSN, "S/N of a line's flux below which velocity and width are not given")
	o.output.addFlags(f, "products")
}

func newExtractCommand(a *app) *cobra.Command {
	var o extractOptions
	cmd := &cobra.Command{
		Use:   "extract RUN -o OUT",
		Short: "Take spectra, narrow-band images and maps of lines out of a cube",
		Long: `Take spectra, narrow-band images and maps of lines out of the cube of RUN, a
folder that reduce wrote, or a cube.fits.

With an aperture: its spectrum, and the light of a band and the lines in it.
Without one: an image of a band, or maps of lines, of the whole field.

Positions are degrees (123.3 -21.6) or sexagesimal (08:13:12 -21:36:00, or
8h13m12s -21d36m00s); sizes are arc seconds; position angles are degrees, north
through east. Errors know that voxels share pixels and that decoding couples
elements; those that take voxels for independent stand beside them.

RUN may be what combine wrote: errors then come from the runs in it, whose folders must
be where they were, as seen from it.`,
		Example: `  mirrorloom extract run --circle "08:13:12.0 +21:36:00 2.5" --annulus "4 7" -o star
  mirrorloom extract run --band 500-502 --continuum 494-498,504-508 -o oxygen
  mirrorloom extract run --lines 656.461,658.527,654.986 -o hydrogen`,
		Args: arguments("RUN, a folder that reduce or combine wrote, or a cube.fits"),
		RunE: func(cmd *cobra.Command, args []string) error { return runExtract(cmd.Context(), a, args[0], o) },
	}
	o.addFlags(cmd.Flags())
	return cmd
}

// options turns flags into those of the pipeline; every mistake is one of usage.
func (o *extractOptions) options(a *app, run string) (extract.Options, error) {
	opts := extract.Options{Run: run, Progress: a.progress()}
	if err := lacking("extract", needed{"-o", o.output.dir}); err != nil {
		return opts, err
	}
	var err error
	s := &opts.Spectrum
	if s.Aperture, err = o.aperture(); err != nil {
		return opts, err
	}
	s.Optimal = o.optimal
	switch {
	case s.Aperture == nil && (o.annulus != "" || o.background != "" || o.optimal):
		return opts, errors.New("--annulus, --background and --optimal go with an aperture; name one")
	case o.annulus != "" && o.background != "":
		return opts, errors.New("give --annulus or --background, not both")
	case o.annulus != "":
		s.Background, err = extract.ParseAnnulus(o.annulus, s.Aperture)
	case o.background != "":
		s.Background, err = extract.ParsePolygon(o.background, o.inVoxels)
	}
	if err != nil {
		return opts, err
	}
	if opts.Image, err = o.bandAsked(); err != nil {
		return opts, err
	}
	if len(o.lines) > 0 {
		opts.Lines = &o.line
		opts.Lines.RestNM, opts.Lines.Free = o.lines, o.free
	}
	if s.Aperture == nil {
		if opts.Image == nil && opts.Lines == nil {
			return opts, errors.New("extract needs an aperture, --band or --lines; see 'mirrorloom extract --help'")
		}
		return opts, nil
	}
	if opts.Image != nil {
		s.Bands, opts.Image = []extract.Band{*opts.Image}, nil
	}
	s.Lines, opts.Lines = opts.Lines, nil
	return opts, nil
}

// aperture is nil without one.
func (o *extractOptions) aperture() (*extract.Shape, error) {
	var shapes []*extract.Shape
	for _, form := range []struct {
		text  string
		parse func(string, bool) (*extract.Shape, error)
	}{{o.circle, extract.ParseCircle}, {o.ellipse, extract.ParseEllipse}, {o.polygon, extract.ParsePolygon}} {
		if form.text == "" {
			continue
		}
		s, err := form.parse(form.text, o.inVoxels)
		if err != nil {
			return nil, err
		}
		shapes = append(shapes, s)
	}
	if o.elements != "" || o.rows != "" {
		if o.elements == "" || o.rows == "" {
			return nil, errors.New("--elements and --rows go together")
		}
		s, err := extract.ParseVoxels(o.elements, o.rows)
		if err != nil {
			return nil, err
		}
		shapes = append(shapes, s)
	}
	switch len(shapes) {
	case 0:
		return nil, nil
	case 1:
		return shapes[0], nil
	}
	return nil, errors.New("give one aperture: a circle, an ellipse, a polygon or elements and rows")
}

func (o *extractOptions) bandAsked() (*extract.Band, error) {
	if o.band == "" {
		if o.continuum != "" {
			return nil, errors.New("--continuum goes with --band")
		}
		return nil, nil
	}
	b, err := extract.ParseBand(o.band)
	if err == nil && o.continuum != "" {
		b.Sides, err = extract.ParseSides(o.continuum)
	}
	return &b, err
}

func runExtract(ctx context.Context, a *app, run string, o extractOptions) error {
	opts, err := o.options(a, run)
	if err != nil {
		return usageError{err}
	}
	var answer *extract.Answer
	err = o.output.write(ctx, func(dir string) (err error) {
		opts.Out = dir
		answer, err = extract.Run(ctx, opts)
		return err
	}, run)
	if err != nil {
		return err
	}
	return a.answer(answer, func(w io.Writer) error { return printExtract(w, o.output.dir, answer, o.line.MinSN) })
}

func printExtract(w io.Writer, dir string, a *extract.Answer, minSN float64) error {
	var b strings.Builder
	if s := a.Spectrum; s != nil {
		fmt.Fprintf(&b, "%s: middle at RA %.6f, Dec %+.6f (element %.2f, row %.2f), %.2f voxels\n", s.Aperture, s.RADeg, s.DecDeg, s.Element, s.Row, s.AreaVoxels)
		fmt.Fprintf(&b, "spectrum: %d wavelengths with a value, S/N %.3g in the median; the error is %.3f times the naive one\n", s.Channels, s.MedianSN, s.ErrorOverNaive)
		for _, band := range s.Bands {
			fmt.Fprintf(&b, "%g to %g nm: %s +- %s %s (naive %s)\n", band.FromNM, band.ToNM, figure(band.Signal), figure(band.Error), band.Unit, figure(band.NaiveError))
		}
		printLines(&b, s.Lines)
	}
	if im := a.Image; im != nil {
		if im.Pixels == 0 {
			fmt.Fprintf(&b, "image of %g to %g nm: nothing found: no place has good voxels at all these wavelengths, so there is no picture; choose a band that the cube covers\n", im.FromNM, im.ToNM)
		} else {
			fmt.Fprintf(&b, "image of %g to %g nm: %d pixels with a value, S/N %.3g in the median; the error is %.3f times the naive one\n", im.FromNM, im.ToNM, im.Pixels, im.MedianSN, im.ErrorOverNaive)
		}
	}
	if l := a.Lines; l != nil {
		fmt.Fprintf(&b, "lines: of %d spectra %d show all lines at the S/N asked for, %d do not, and for %d no fit was found\n", l.Pixels+l.Failed, l.Pixels-l.Faint, l.Faint, l.Failed)
		if foundLines(l) {
			b.WriteString("medians where a line has the S/N asked for:\n")
			printLines(&b, l)
		} else {
			fmt.Fprintf(&b, "nothing found: no single spectrum shows a line at a S/N of %g, so there are no velocities and no picture; add up an aperture (--circle with --lines), lower --min-sn, or search elsewhere with --velocity and --velocity-range\n", minSN)
		}
	}
	for _, f := range a.Files {
		fmt.Fprintln(&b, filepath.Join(dir, f))
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// foundLines tells whether any spectrum shows a line at the S/N asked for.
func foundLines(l *extract.LinesAnswer) bool {
	return slices.ContainsFunc(l.Lines, func(line extract.LineAnswer) bool { return line.Velocity != nil })
}

func printLines(b *strings.Builder, l *extract.LinesAnswer) {
	if l == nil {
		return
	}
	for _, line := range l.Lines {
		fmt.Fprintf(b, "%g nm: flux %s +- %s %s, velocity %s +- %s km/s, width %s +- %s km/s (FWHM as observed)\n", line.RestNM,
			figure(line.Flux), figure(line.FluxErr), l.Unit, figure(line.Velocity), figure(line.VelocityErr), figure(line.Width), figure(line.WidthErr))
	}
}

// figure is a number that may not be known.
func figure(x *float64) string {
	if x == nil {
		return "unknown"
	}
	return fmt.Sprintf("%.5g", *x)
}
