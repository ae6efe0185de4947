package instrument

import "mirrorloom/calib/physics"

// StripArray is the device as a grating of strips so many mirrors wide along u. Mounted
// diagonally it is turned so that the mirrors tilt along the dispersion.
func (p *Profile) StripArray(mirrors int) physics.StripArray {
	g := physics.MirrorGrating{PitchUM: p.DMD.PitchUM, TiltDeg: p.DMD.TiltDeg}
	if p.DMD.IncidenceDeg != nil {
		g.IncidenceDeg = *p.DMD.IncidenceDeg
	}
	return physics.StripArray{MirrorGrating: g, Diagonal: p.DMD.Mounting == Diagonal, Mirrors: mirrors}
}

// Beam is the light at the device.
func (p *Profile) Beam() physics.Beam {
	return physics.Beam{FNumber: p.Spectrograph.FNumber, Oversize: p.Spectrograph.PupilOversize, ObscuredFraction: p.Telescope.ObscuredFraction}
}
