package product

import "mirrorloom/pipeline/instrument"

// SpectralAxis is the wavelength axis of a cube: its grid and the standard of rest to
// which the grid's wavelengths belong. What happens in the instrument is a matter of
// wavelengths at the telescope, which its methods give, vacuum nm.
type SpectralAxis struct {
	Grid  instrument.Grid
	Frame SpectralFrame
}

// Axis is the wavelength axis of the cube.
func (s Schema) Axis() SpectralAxis { return SpectralAxis{s.Grid, s.Frame} }

// ObservedNM is the centre of voxel i at the telescope; i need not be whole.
func (a SpectralAxis) ObservedNM(i float64) float64 {
	return a.Frame.ObservedNM(a.Grid.WavelengthNM(i))
}

// FirstNM and LastNM are the outer edges of the first and last voxel.
func (a SpectralAxis) FirstNM() float64 { return a.ObservedNM(-0.5) }

// LastNM is described at FirstNM.
func (a SpectralAxis) LastNM() float64 { return a.ObservedNM(float64(a.Grid.Count) - 0.5) }

// Index inverts ObservedNM.
func (a SpectralAxis) Index(observedNM float64) float64 {
	return a.Grid.Index(a.Frame.FrameNM(observedNM))
}

// EvenStepNM is the voxels' width at the telescope if they are equally wide there; 0 if
// they are not.
func (a SpectralAxis) EvenStepNM() float64 {
	if !a.Grid.Even() {
		return 0
	}
	return a.Frame.ObservedNM(a.Grid.StepNM)
}
