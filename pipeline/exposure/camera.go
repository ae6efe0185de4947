package exposure

import (
	"fmt"
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
)

// Camera turns rows of raw frames into electrons above the bias level, in
// active pixels.
type Camera struct {
	Columns, Rows int
	Amplifiers    []Amplifier
	saturationADU float64
	linearity     []float64 // see calib.Linearise
	// Variance gives, by detector row, the variance of a sample without light
	// in every column, electrons squared; rows of the same amplifiers share it.
	Variance [][]float64
	// PhotonExcess: the variance of light is (1 + PhotonExcess) times the light, as
	// the read mode makes it; 0 for single reads.
	PhotonExcess float64
	Noise        physics.EffectiveNoise // of the read mode
}

// Amplifier is one readout chain with the place of its pixels.
type Amplifier struct {
	Place       instrument.Placement
	overscan    instrument.Section
	hasOverscan bool
	levels      calib.Overscan
	Gain        float64 // electrons per ADU
	biasADU     float64 // where there is no overscan
	variance    float64 // of a sample without light, electrons squared
}

// NewCamera makes the camera of a detector. Errors name the key of the profile.
func NewCamera(d *instrument.Detector) (*Camera, error) {
	c := &Camera{Columns: d.Columns, Rows: d.Rows, saturationADU: d.SaturationADU, linearity: d.Linearity}
	mode := d.Mode()
	var err error
	if c.Noise, err = (physics.ReadMode{Kind: physics.ReadKind(mode.Kind), Reads: mode.Reads, Spacing: mode.Spacing}).Noise(); err != nil {
		return nil, fmt.Errorf("detector.read_mode of the profile: %w", err)
	}
	c.PhotonExcess = c.Noise.Photon - 1
	for i, place := range d.Active() {
		a := d.Amplifiers[i]
		amp := Amplifier{Place: place, Gain: a.GainEPerADU, biasADU: a.BiasADU, variance: calib.ReadVariance(a.ReadNoiseE*math.Sqrt(c.Noise.Read), a.GainEPerADU)}
		if amp.overscan, amp.hasOverscan = a.Overscan.Section(); amp.hasOverscan {
			if amp.overscan[2] > a.Data[2] || amp.overscan[3] < a.Data[3] {
				return nil, fmt.Errorf("the overscan of amplifier %d spans rows %d to %d, not all of its data's rows %d to %d; mend detector.amplifiers of the profile", i+1, amp.overscan[2], amp.overscan[3], a.Data[2], a.Data[3])
			}
			amp.levels = calib.DefaultOverscan(amp.overscan.Width())
			// The level's own noise: read noise over the pixels it averages.
			amp.variance *= 1 + 1/float64(amp.averaged())
		}
		c.Amplifiers = append(c.Amplifiers, amp)
	}
	c.Variance = c.variances()
	return c, nil
}

// averaged is how many overscan pixels a level is the mean of, 0 without overscan.
func (a *Amplifier) averaged() int {
	if !a.hasOverscan {
		return 0
	}
	return min(a.overscan.Height(), 2*a.levels.HalfWindow+1) * a.overscan.Width()
}

// LevelVariance is that of a row's bias level, electrons squared, and how many rows
// share overscan pixels; 0 and 1 without overscan.
func (a *Amplifier) LevelVariance() (variance float64, rows int) {
	n := a.averaged()
	if n == 0 {
		return 0, 1
	}
	return a.variance / float64(n+1), 2*a.levels.HalfWindow + 1
}

// AmplifierOf gives the amplifier of each column, by detector row; rows of the same
// amplifiers share it.
func (c *Camera) AmplifierOf() [][]uint8 {
	all := make([][]uint8, c.Rows)
	for y := range all {
		row := make([]uint8, c.Columns)
		for i := range c.Amplifiers {
			p := &c.Amplifiers[i].Place
			if y >= p.Y0 && y < p.Y0+p.Raw.Height() {
				for x := p.X0; x < p.X0+p.Raw.Width(); x++ {
					row[x] = uint8(i)
				}
			}
		}
		if y > 0 && slices.Equal(row, all[y-1]) {
			row = all[y-1]
		}
		all[y] = row
	}
	return all
}

// NoisiestVariance is the largest variance of a sample without light among the
// amplifiers, electrons squared.
func (c *Camera) NoisiestVariance() float64 {
	most := 0.0
	for i := range c.Amplifiers {
		most = max(most, c.Amplifiers[i].variance)
	}
	return most
}

// variances fills in Camera.Variance.
func (c *Camera) variances() [][]float64 {
	all := make([][]float64, c.Rows)
	for y := range all {
		row := make([]float64, c.Columns)
		for i := range c.Amplifiers {
			a := &c.Amplifiers[i]
			if y >= a.Place.Y0 && y < a.Place.Y0+a.Place.Raw.Height() {
				for x := a.Place.X0; x < a.Place.X0+a.Place.Raw.Width(); x++ {
					row[x] = a.variance
				}
			}
		}
		if y > 0 && equal(row, all[y-1]) {
			row = all[y-1]
		}
		all[y] = row
	}
	return all
}

func equal(a, b []float64) bool {
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

// Merge adds the flags of a block to those of all columns from row y0 on.
func (c *Camera) Merge(dst []calib.Flag, y0 int, flags []calib.Flag, x, y, w int) {
	for i, f := range flags {
		if f != 0 {
			dst[(y+i/w-y0)*c.Columns+x+i%w] |= f
		}
	}
}
