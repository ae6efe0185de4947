package register

import (
	"fmt"
	"io"
	"math"
	"os"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/product"
)

// File is the name of a registration in a run and in a sequence.
const File = "registration.yaml"

// Registration is how the device lies on the sky of a telescope that was asked to point
// somewhere.
type Registration struct {
	// Profile is the instrument's name, SequenceSHA the sequence of the night.
	Profile     string `yaml:"profile"`
	SequenceSHA string `yaml:"sequence_sha256"`
	// Stars is how many it comes from, RMSArcsec that of a coordinate of theirs.
	Stars     int     `yaml:"stars"`
	RMSArcsec float64 `yaml:"rms_arcsec"`
	// RotationDeg is the position angle of the device's second axis less the one that the
	// telescope was asked for, Scale the arc seconds a mirror over the profile's.
	RotationDeg      float64 `yaml:"rotation_deg"`
	RotationErrorDeg float64 `yaml:"rotation_error_deg"`
	Scale            float64 `yaml:"scale"`
	ScaleError       float64 `yaml:"scale_error"`
	Parity           int     `yaml:"parity"`
	// OffsetUArcsec and OffsetWArcsec are how far the device's middle lies from where the
	// telescope was asked to point, along the device's own axes u and w.
	OffsetUArcsec     float64 `yaml:"offset_u_arcsec"`
	OffsetWArcsec     float64 `yaml:"offset_w_arcsec"`
	OffsetErrorArcsec float64 `yaml:"offset_error_arcsec"`
}

// fewestForRegistration stars make one: two that fix rotation and scale, one that bears
// them out.
const fewestForRegistration = 3

// Device is what a sequence says of the device that a Registration is of.
type Device struct {
	Profile, SequenceSHA string
	// MiddleArcsec is how far the middle of the elements lies from the device's along u.
	MiddleArcsec float64
	// Before is the registration by which the telescope was pointed; nil without.
	Before *Registration
}

// Registration is what a solution says of the device; nil of too few stars.
func (s *Solution) Registration(asked product.Schema, d Device) *Registration {
	if len(s.matches) < fewestForRegistration {
		return nil
	}
	fit, err := calib.FitPlaneMap(s.matches, calib.MapRule{Kind: calib.Similarity, Sigmas: outlierSigmas, Parity: s.Schema.Parity})
	if err != nil {
		return nil // on one line or one place
	}
	f := fitting{matcher: &matcher{schema: asked}}
	found := f.corrected(fit, calib.Similarity)
	r := &Registration{
		Profile: d.Profile, SequenceSHA: d.SequenceSHA, Stars: fit.Used, RMSArcsec: fit.RMS,
		RotationDeg: math.Remainder(found.RotangDeg-asked.RotangDeg, 360), Scale: found.C2Deg / asked.C2Deg, Parity: found.Parity,
		ScaleError:        math.Sqrt(fit.Covariance.At(2, 2)),
		OffsetErrorArcsec: math.Sqrt(fit.Covariance.At(0, 0)),
	}
	r.RotationErrorDeg = math.Sqrt(fit.Covariance.At(3, 3)) / r.Scale * 180 / math.Pi
	east, north := physics.Gnomonic(found.RADeg, found.DecDeg, asked.RADeg, asked.DecDeg)
	if b := d.Before; b != nil {
		// The telescope was sent to where b puts the device on what was asked for.
		e, n := offset(b.OffsetUArcsec+d.MiddleArcsec, b.OffsetWArcsec, asked.RotangDeg, b.Parity)
		east, north = east+e, north+n
		r.RotationDeg = math.Remainder(r.RotationDeg+b.RotationDeg, 360)
		r.Scale *= b.Scale
	}
	r.OffsetUArcsec, r.OffsetWArcsec = alongAxes(east, north, found.RotangDeg, found.Parity)
	scale := found.C1Deg / asked.C1Deg
	r.OffsetUArcsec -= d.MiddleArcsec * scale
	return r
}

// offset is a distance along the device's axes as one on the sky; alongAxes inverts it.
func offset(u, w, rotangDeg float64, parity int) (east, north float64) {
	sin, cos := math.Sincos(rotangDeg * math.Pi / 180)
	u *= float64(parity)
	return -u*cos + w*sin, u*sin + w*cos
}

func alongAxes(east, north, rotangDeg float64, parity int) (u, w float64) {
	sin, cos := math.Sincos(rotangDeg * math.Pi / 180)
	return (-east*cos + north*sin) * float64(parity), east*sin + north*cos
}

// Pointed is where to send the telescope, so that the middle of the elements, so many arc
// seconds from the device's along u, comes to lie on a place with the second axis at a
// position angle.
func (r *Registration) Pointed(raDeg, decDeg, rotangDeg, middleArcsec float64) (pointRADeg, pointDecDeg, pointRotangDeg float64) {
	east, north := offset(r.OffsetUArcsec+middleArcsec, r.OffsetWArcsec, rotangDeg, r.Parity)
	pointRADeg, pointDecDeg = physics.FromGnomonic(-east, -north, raDeg, decDeg)
	return pointRADeg, pointDecDeg, math.Remainder(rotangDeg-r.RotationDeg, 360)
}

// Write writes it as YAML into a folder.
func (r *Registration) Write(path string) error {
	text, err := config.Encode(r)
	if err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	return fitsutil.WriteAtomic(path, func(w io.Writer) error { _, err := w.Write(text); return err })
}

// Read reads a registration. Errors name the file, the line and the key.
func Read(path string) (*Registration, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("open the registration: %w", err)
	}
	return parse(path, data)
}

func parse(name string, data []byte) (*Registration, error) {
	doc, err := config.Parse(name, data)
	if err != nil {
		return nil, err
	}
	r := new(Registration)
	if err := doc.Decode(r); err != nil {
		return nil, err
	}
	c := doc.Checks()
	c.That(r.Profile != "", "profile", "the instrument has no name; give that of its profile")
	c.Count("stars", r.Stars, fewestForRegistration, 1<<20)
	c.Within("rotation_deg", r.RotationDeg, -360, 360)
	c.Within("scale", r.Scale, 0.5, 2)
	c.That(r.Parity == 1 || r.Parity == -1, "parity", "%d is no parity; write 1 or -1", r.Parity)
	const far = 36000 // arc seconds: ten degrees
	c.Within("offset_u_arcsec", r.OffsetUArcsec, -far, far)
	c.Within("offset_w_arcsec", r.OffsetWArcsec, -far, far)
	if err := c.Err(); err != nil {
		return nil, err
	}
	return r, nil
}
