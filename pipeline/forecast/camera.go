package forecast

import (
	"fmt"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
)

// camera is what the detector adds, by active pixel.
type camera struct {
	columns, rows int
	placements    []instrument.Placement
	// quiet is the variance of a frame without charge and full the electrons at which it
	// saturates, by amplifier.
	quiet, full []float64
	// photon is what the read mode multiplies the variance of charge by.
	photon  float64
	darkEPS float64
}

func newCamera(p *instrument.Profile) (*camera, error) {
	d := p.Detector
	mode := d.Mode()
	noise, err := physics.ReadMode{Kind: physics.ReadKind(mode.Kind), Reads: mode.Reads, Spacing: mode.Spacing}.Noise()
	if err != nil {
		return nil, fmt.Errorf("profile: detector.read_mode: %w", err)
	}
	c := &camera{columns: d.Columns, rows: d.Rows, placements: d.Active(), photon: noise.Photon, darkEPS: d.DarkEPerS}
	for _, a := range d.Amplifiers {
		// The converter rounds to whole numbers: 1/12 of a step's square.
		c.quiet = append(c.quiet, noise.Read*a.ReadNoiseE*a.ReadNoiseE+a.GainEPerADU*a.GainEPerADU/12)
		m := d.SaturationADU - a.BiasADU
		linear, power := 1.0, 1.0
		for _, coefficient := range d.Linearity {
			power *= m
			linear += coefficient * power
		}
		c.full = append(c.full, m*linear*a.GainEPerADU)
	}
	return c, nil
}

// amplifier of a pixel; pixels tile the detector.
func (c *camera) amplifier(x, y int) int {
	for i, p := range c.placements {
		if x >= p.X0 && x-p.X0 <= p.Raw[1]-p.Raw[0] && y >= p.Y0 && y-p.Y0 <= p.Raw[3]-p.Raw[2] {
			return i
		}
	}
	return 0
}
