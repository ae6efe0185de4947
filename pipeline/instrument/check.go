package instrument

import (
	"fmt"
	"math"
	"regexp"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/config"
)

// Validate checks a profile that was built in Go as Load checks one from a
// file; the first failure is a *config.Error with the key path but no line.
func (p *Profile) Validate() error { return p.check(nil) }

// maxSide bounds devices and detectors: a frame of 32768 x 32768 is twice the
// side of the largest single sensors, and products of two sides fit an int.
const maxSide = 32768

var profileName = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9._-]{0,31}$`)

// check runs every check of the values; doc gives the lines and may be nil.
// What needs an element's width or their number (an element wider than the
// device, more mirrors than u has, a band that leaves the detector for the outer
// elements) is the plan's to check.
func (p *Profile) check(doc *config.Doc) error {
	c := doc.Checks()
	c.That(profileName.MatchString(p.Name), "name", "%q is no profile name; write 1 to 32 letters, digits, dots, hyphens or underscores", p.Name)
	p.checkTelescope(c)
	p.checkDMD(c)
	p.checkSpectrograph(c)
	p.checkDetector(c)
	p.Keywords.check(c)
	p.Kinds.check(c)
	p.checkGrid(c)
	return c.Err()
}

func (p *Profile) checkTelescope(c *config.Checks) {
	// The upper limit catches a diameter in millimetres.
	c.Within("telescope.diameter_m", p.Telescope.DiameterM, 0.01, 100)
	f := p.Telescope.ObscuredFraction
	c.That(f >= 0 && f < 1, "telescope.obscured_fraction", "%v is not from 0 to below 1; give the shadowed share of the area", f)
	p.Telescope.Throughput.check(c, "telescope.throughput")
	p.Site.check(c, "site")
}

func (p *Profile) checkDMD(c *config.Checks) {
	d := p.DMD
	c.Count("dmd.columns", d.Columns, 1, maxSide)
	c.Count("dmd.rows", d.Rows, 1, maxSide)
	c.Positive("dmd.pitch_um", d.PitchUM)
	c.OneOf("dmd.mounting", d.Mounting, Square, Diagonal)
	c.That(d.TiltDeg > 0 && d.TiltDeg < 45, "dmd.tilt_deg", "%v is not between 0 and 45; give the mirrors' tilt from flat", d.TiltDeg)
	c.Positive("dmd.arcsec_per_mirror", d.ArcsecPerMirror)
	if d.IncidenceDeg != nil {
		c.Within("dmd.incidence_deg", *d.IncidenceDeg, -60, 60)
	}
	if d.LoadS != nil {
		c.NotNegative("dmd.load_s", *d.LoadS)
	}
	c.That(d.Parity == 1 || d.Parity == -1, "dmd.parity", "%d is no parity; write 1 or -1", d.Parity)
	d.Contrast.check(c, "dmd.contrast")
	c.That(d.StuckCSV == "" || config.BareName(d.StuckCSV), "dmd.stuck_csv", "%q is no bare file name; put the file beside the profile and name it without a folder", d.StuckCSV)
}

func (p *Profile) checkSpectrograph(c *config.Checks) {
	s := p.Spectrograph
	c.Positive("spectrograph.f_number", s.FNumber)
	// A mirror turns the beam by twice its tilt between flat and either state;
	// cones of half-angle atan(1/2N) wider than the tilt overlap (common
	// practice; N > 2.35 at 12 degrees).
	slowest := physics.FastestFNumber(p.DMD.TiltDeg)
	c.That(s.FNumber > slowest, "spectrograph.f_number", "the beams of on and off mirrors overlap at f/%v with a tilt of %v degrees; give a slower beam than f/%.4g", s.FNumber, p.DMD.TiltDeg, slowest)
	c.Within("spectrograph.pupil_oversize", s.PupilOversize, 1, 10)
	c.Positive("spectrograph.center_nm", s.CenterNM)
	for i, d := range s.DispersionPxPerNM {
		c.Finite(fmt.Sprintf("spectrograph.dispersion_px_per_nm[%d]", i), d)
	}
	c.Positive("spectrograph.u_step_px", s.UStepPx)
	c.Positive("spectrograph.w_step_px", s.WStepPx)
	c.Finite("spectrograph.x_center_px", s.XCenterPx)
	c.Within("spectrograph.y_center_px", s.YCenterPx, -0.5, float64(p.Detector.Rows)-0.5)
	c.Within("spectrograph.slit_tilt", s.SlitTilt, -1, 1)
	c.Finite("spectrograph.smile_per_px", s.SmilePerPx)
	p.checkTrace(c)
	// Below 3 px resampling errs by more than the noise of a bright line.
	c.That(s.LSFFWHMPx >= 3, "spectrograph.lsf_fwhm_px", "%v px is below 3, too few for lines to be resampled well; give a wider line spread or bin less", s.LSFFWHMPx)
	s.Throughput.check(c, "spectrograph.throughput")
}

// maxTraceRows is how far a spectrum may leave its row, end to end: the rows
// that a reduction keeps around a strip are sized by it.
const maxTraceRows = 8

func (p *Profile) checkTrace(c *config.Checks) {
	s := p.Spectrograph
	c.Finite("spectrograph.trace_tilt", s.TraceTilt)
	c.Finite("spectrograph.trace_curve_per_px", s.TraceCurvePerPx)
	least, most := quadraticRange(0, s.TraceTilt, s.TraceCurvePerPx, -s.XCenterPx, float64(p.Detector.Columns-1)-s.XCenterPx)
	c.That(most-least <= maxTraceRows, "spectrograph.trace_tilt", "a spectrum leaves its row by %.3g rows end to end, more than %d; turn the detector or correct trace_tilt and trace_curve_per_px", most-least, maxTraceRows)
}

// quadraticRange is the least and the greatest value of a + b t + c t^2 for t
// from t0 to t1.
func quadraticRange(a, b, c, t0, t1 float64) (least, most float64) {
	at := func(t float64) float64 { return a + t*(b+t*c) }
	least, most = min(at(t0), at(t1)), max(at(t0), at(t1))
	if vertex := -b / (2 * c); vertex > min(t0, t1) && vertex < max(t0, t1) {
		least, most = min(least, at(vertex)), max(most, at(vertex))
	}
	return least, most
}

func (t Curve) check(c *config.Checks, path string) {
	wavelengths := make([]float64, len(t))
	for i, point := range t {
		at := fmt.Sprintf("%s[%d]", path, i)
		wavelengths[i] = point.WavelengthNM
		c.Positive(at+".wavelength_nm", point.WavelengthNM)
		c.Within(at+".fraction", point.Fraction, 0, 1)
	}
	c.Ascending(path, "wavelength_nm", wavelengths, 2)
}

func (t Contrast) check(c *config.Checks, path string) {
	wavelengths := make([]float64, len(t))
	for i, point := range t {
		at := fmt.Sprintf("%s[%d]", path, i)
		wavelengths[i] = point.WavelengthNM
		c.Positive(at+".wavelength_nm", point.WavelengthNM)
		c.That(point.Ratio > 1 && !math.IsInf(point.Ratio, 0), at+".ratio", "%v is not above 1; give the light of an on mirror over that of an off mirror", point.Ratio)
	}
	c.Ascending(path, "wavelength_nm", wavelengths, 1)
}
