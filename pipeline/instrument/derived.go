package instrument

import "math"

// URange returns the first and the last u of the device, inclusive:
// 0..columns-1 mounted square, 0..columns+rows-2 mounted diagonally.
func (p *Profile) URange() (uMin, uMax int) {
	if p.DMD.Mounting == Diagonal {
		return 0, p.DMD.Columns + p.DMD.Rows - 2
	}
	return 0, p.DMD.Columns - 1
}

// WRange returns the first and the last w of the device, inclusive:
// 0..rows-1 mounted square, -(columns-1)..rows-1 mounted diagonally.
func (p *Profile) WRange() (wMin, wMax int) {
	if p.DMD.Mounting == Diagonal {
		return -(p.DMD.Columns - 1), p.DMD.Rows - 1
	}
	return 0, p.DMD.Rows - 1
}

// UCenter is the middle of the device's u: strips are centred there as well as
// their widths allow, unless the field lies beside it.
func (p *Profile) UCenter() float64 {
	first, last := p.URange()
	return float64(first+last) / 2
}

// FieldFirstU is the first u of a field of so many u whose middle lies offset u from the
// device's, by half a u more where its width is odd and the device's even or the other way
// round. It may lie off the device.
func (p *Profile) FieldFirstU(width, offset int) int {
	return offset + int(math.Ceil(p.UCenter()-float64(width-1)/2))
}

// WCenter is the middle of the device's w, r_c of the geometry: its light falls
// on row y_c at column x_c.
func (p *Profile) WCenter() float64 {
	first, last := p.WRange()
	return float64(first+last) / 2
}

// ArcsecPerU is a, the distance on the sky of neighbouring u, and of
// neighbouring w, in arc seconds: a mirror's side mounted square, that over the
// square root of 2 mounted diagonally.
func (p *Profile) ArcsecPerU() float64 {
	if p.DMD.Mounting == Diagonal {
		return p.DMD.ArcsecPerMirror / math.Sqrt2
	}
	return p.DMD.ArcsecPerMirror
}

// VoxelDeg returns the steps of the cube's celestial axes in degrees for
// elements of elementMirrors u: c1 from element to element and c2 from detector
// row to detector row (at x = x_c).
func (p *Profile) VoxelDeg(elementMirrors int) (c1, c2 float64) {
	const arcsecPerDeg = 3600
	a := p.ArcsecPerU() / arcsecPerDeg
	return a * float64(elementMirrors), a / p.Spectrograph.WStepPx
}

// ElementStepPx is x_e, the distance on the detector of neighbouring elements of
// elementMirrors u, px.
func (p *Profile) ElementStepPx(elementMirrors int) float64 {
	return p.Spectrograph.UStepPx * float64(elementMirrors)
}

// CollectingAreaM2 is the unobscured area of the primary, m^2.
func (p *Profile) CollectingAreaM2() float64 {
	t := p.Telescope
	return math.Pi / 4 * t.DiameterM * t.DiameterM * (1 - t.ObscuredFraction)
}

// Throughput is the fraction of the photons collected at a vacuum wavelength in
// nm that become detected electrons: telescope times spectrograph.
func (p *Profile) Throughput(wavelengthNM float64) float64 {
	return p.Telescope.Throughput.At(wavelengthNM) * p.Spectrograph.Throughput.At(wavelengthNM)
}

// OverheadS is the time between the end of an exposure and the start of the next, seconds:
// the detector is read and the next mask loaded.
func (p *Profile) OverheadS() float64 {
	if p.DMD.LoadS == nil {
		return p.Detector.ReadS
	}
	return p.Detector.ReadS + *p.DMD.LoadS
}
