package trial

import (
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Lamps is a small field of the embedded profile "optical" whose nights hold all
// that calibrates the instrument, which is not quite the profile's: 47 elements of
// two mirrors, 128 voxels in the red, where neon has lines enough, and a detector
// wide enough for light that lands up to 15 px from where the profile has it.
func Lamps() (*Field, error) {
	f, err := load("optical", "demo")
	if err != nil {
		return nil, err
	}
	p := f.Profile
	p.DMD.Columns, p.DMD.Rows = 100, 40
	p.Spectrograph.TraceTilt = 0.009 // 2.6 rows end to end
	p.Spectrograph.XCenterPx, p.Spectrograph.YCenterPx = 143.7, 27.2
	p.Spectrograph.CenterNM = 613
	p.Grid = instrument.Grid{FirstNM: 581, StepNM: 0.5, Count: 128}
	TwoAmplifiers(&p.Detector, 288, 56)
	f.small()
	c := &f.Target.Calibration
	c.Flat = sequence.FlatFrames{Count: 4, DwellSeconds: 5, Lamp: "halogen", CodedCycles: 1}
	c.Arc = sequence.ArcFrames{Count: 1, DwellSeconds: 8, Lamp: "Ne", Every: 6}
	f.Imperfect = true
	f.scenery = func() {
		f.Scene = skyWithLines(p.Grid, 20.9, 2e-18)
		f.addStars(16.4, 610, 1.2)
		f.addRing(16.5, 2e-15)
	}
	f.scenery()
	return f, nil
}
