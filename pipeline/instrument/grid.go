package instrument

import (
	"fmt"
	"math"

	"mirrorloom/calib/physics"
)

// Grid is the wavelength axis of the cube. On its own scale voxel i is centred on
//
//	FirstNM + i StepNM                 spaced linearly
//	FirstNM exp(i StepNM / FirstNM)    spaced logarithmically
//
// and reaches from i - 1/2 to i + 1/2; StepNM is the first voxel's width in both. The
// scale is one of wavelengths in vacuum or in standard air (Axis); methods answer in
// vacuum nm always. Two grids are the same if they are equal.
type Grid struct {
	FirstNM float64 `yaml:"first_nm"`
	StepNM  float64 `yaml:"step_nm"`
	Count   int     `yaml:"count"`
	// Axis is Vacuum or Air. Optional; wave.
	Axis Axis `yaml:"axis" config:"optional"`
	// Spacing is Linear or Logarithmic. Optional; linear.
	Spacing Spacing `yaml:"spacing" config:"optional"`
}

// Axis is the medium in which a grid counts wavelengths; in YAML wave or awav, the words
// of FITS.
type Axis int

// The axes.
const (
	Vacuum Axis = iota // wave
	Air                // awav: standard air, Ciddor 1996
)

// Spacing is how a grid's steps grow; in YAML linear or log.
type Spacing int

// The spacings.
const (
	Linear      Spacing = iota // the same step in nm
	Logarithmic                // the same step in velocity
)

// MarshalText gives the word of YAML.
func (a Axis) MarshalText() ([]byte, error) { return []byte(a.String()), nil }

// UnmarshalText reads the word of YAML.
func (a *Axis) UnmarshalText(text []byte) error {
	switch string(text) {
	case "wave":
		*a = Vacuum
	case "awav":
		*a = Air
	default:
		return fmt.Errorf("%q is unknown; use wave (vacuum) or awav (air)", text)
	}
	return nil
}

func (a Axis) String() string {
	if a == Air {
		return "awav"
	}
	return "wave"
}

// MarshalText gives the word of YAML.
func (s Spacing) MarshalText() ([]byte, error) { return []byte(s.String()), nil }

// UnmarshalText reads the word of YAML.
func (s *Spacing) UnmarshalText(text []byte) error {
	switch string(text) {
	case "linear":
		*s = Linear
	case "log":
		*s = Logarithmic
	default:
		return fmt.Errorf("%q is unknown; use linear or log", text)
	}
	return nil
}

func (s Spacing) String() string {
	if s == Logarithmic {
		return "log"
	}
	return "linear"
}

// WavelengthNM is the centre of voxel i, vacuum nm. i need not be whole: voxel i reaches
// from i - 1/2 to i + 1/2.
func (g Grid) WavelengthNM(i float64) float64 {
	nm := g.AxisNM(i)
	if g.Axis == Air {
		return physics.AirToVacuum(nm)
	}
	return nm
}

// AxisNM is the centre of voxel i on the grid's own scale, nm.
func (g Grid) AxisNM(i float64) float64 {
	if g.Spacing == Logarithmic {
		return g.FirstNM * math.Exp(i*g.StepNM/g.FirstNM)
	}
	return g.FirstNM + i*g.StepNM
}

// Index inverts WavelengthNM: the voxel, not rounded, of a vacuum wavelength in nm.
func (g Grid) Index(vacuumNM float64) float64 {
	nm := vacuumNM
	if g.Axis == Air {
		nm = physics.VacuumToAir(nm)
	}
	if g.Spacing == Logarithmic {
		return math.Log(nm/g.FirstNM) * g.FirstNM / g.StepNM
	}
	return (nm - g.FirstNM) / g.StepNM
}

// LastNM is the centre of the grid's last voxel, vacuum nm.
func (g Grid) LastNM() float64 { return g.WavelengthNM(float64(g.Count - 1)) }

// EdgesNM are the Count+1 edges of the voxels, vacuum nm, ascending.
func (g Grid) EdgesNM() []float64 {
	edges := make([]float64, g.Count+1)
	for i := range edges {
		edges[i] = g.WavelengthNM(float64(i) - 0.5)
	}
	return edges
}

// SpanNM is the distance of the first edge and the last, vacuum nm.
func (g Grid) SpanNM() float64 {
	if g.Even() {
		return float64(g.Count) * g.StepNM
	}
	return g.WavelengthNM(float64(g.Count)-0.5) - g.WavelengthNM(-0.5)
}

// WidthNM is the width of voxel i, vacuum nm.
func (g Grid) WidthNM(i int) float64 {
	if g.Even() {
		return g.StepNM
	}
	return g.WavelengthNM(float64(i)+0.5) - g.WavelengthNM(float64(i)-0.5)
}

// Even tells whether voxels are equally wide in vacuum nm.
func (g Grid) Even() bool { return g.Axis == Vacuum && g.Spacing == Linear }
