package trial

import (
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Field is an instrument, a target and a sky. Change what a trial is about before
// the night is made.
type Field struct {
	Profile *instrument.Profile
	Target  *sequence.Target
	Scene   *rehearse.Scene
	// Imperfect has the nights' instrument differ from the profile, within what
	// rehearse draws, and the reduction calibrate it by its lamps.
	Imperfect bool

	// scenery makes Scene for the profile and target as they stand.
	scenery func()
}

// Turn gives the field a parity and a position angle; its sky turns with it, so
// that every object keeps its place in the cube.
func (f *Field) Turn(parity int, rotangDeg float64) {
	f.Profile.DMD.Parity, f.Target.RotangDeg = parity, rotangDeg
	f.scenery()
}

// The code of the small fields.
const (
	smallV    = 63
	smallDark = 16
)

// Square is a small field of the embedded profile "optical": 47 elements of two
// mirrors, 40 rows of them on 48 rows of the detector, two amplifiers with
// overscan, 96 voxels that every element sees whole. Its middle lies between
// pixels, so that half a pixel lost anywhere shows.
func Square() (*Field, error) {
	f, err := load("optical", "demo")
	if err != nil {
		return nil, err
	}
	p := f.Profile
	p.DMD.Columns, p.DMD.Rows = 100, 40
	p.Spectrograph.TraceTilt = 0.012 // 2.5 rows end to end
	p.Spectrograph.XCenterPx, p.Spectrograph.YCenterPx = 103.7, 23.2
	p.Spectrograph.CenterNM = 505
	p.Grid = instrument.Grid{FirstNM: 481, StepNM: 0.5, Count: 96}
	TwoAmplifiers(&p.Detector, 208, 48)
	f.small()
	f.scenery = func() {
		f.Scene = skyWithLines(p.Grid, 20.9, 2e-18)
		f.addStars(16.4, 500, 1.2)
		f.addRing(16.5, 1e-16)
	}
	f.scenery()
	return f, nil
}

// Struckable is the small square field with elements of one mirror and a code of v with
// so many dark columns, on a detector wide enough, the noise of a raw sample near 10 e.
func Struckable(v, dark int) (*Field, error) {
	f, err := Square()
	if err != nil {
		return nil, err
	}
	f.Target.Code.ElementMirrors = 1
	f.SetCode("m-sequence", v, dark)
	p := f.Profile
	p.DMD.Columns = v
	columns := 2 * ((v + 110) / 2)
	TwoAmplifiers(&p.Detector, columns, 48)
	p.Spectrograph.XCenterPx = float64(columns)/2 - 0.3
	for i := range p.Detector.Amplifiers {
		p.Detector.Amplifiers[i].ReadNoiseE = 8
	}
	f.scenery()
	return f, nil
}

// Diagonal is a small field of the embedded profile "infrared": the device
// turned by 45 degrees, one amplifier without overscan, parity -1.
func Diagonal() (*Field, error) {
	f, err := load("infrared", "demo-infrared")
	if err != nil {
		return nil, err
	}
	p := f.Profile
	p.DMD.Columns, p.DMD.Rows = 96, 96
	p.Spectrograph.TraceTilt = -0.012
	p.Spectrograph.XCenterPx, p.Spectrograph.YCenterPx = 83.7, 24.2
	p.Grid = instrument.Grid{FirstNM: 1574, StepNM: 0.55, Count: 96}
	p.Detector.Columns, p.Detector.Rows = 168, 48
	p.Detector.Amplifiers[0].Data = instrument.Section{1, 168, 1, 48}
	// Rows that the outer strips do not reach are closed for all.
	f.Target.Closed = []sequence.ClosedRow{{First: -95, Last: -41}, {First: 41, Last: 95}}
	f.small()
	f.scenery = func() {
		f.Scene = skyWithLines(p.Grid, 18.6, 1e-17)
		f.addStars(14.8, 1600, 1)
		f.addRing(16, 8e-17)
	}
	f.scenery()
	return f, nil
}

// Beside puts the field beside the device's middle, in the rows given (none: all of them). The
// device of a square mounting grows, and the light falls where it fell: the spectrograph's
// middle moves back by as much.
func (f *Field) Beside(offsetU int, rows ...int) {
	p := f.Profile
	f.Target.Field = &sequence.FieldChoice{OffsetU: offsetU, Rows: rows}
	if p.DMD.Mounting == instrument.Square {
		p.DMD.Columns += 2 * max(offsetU, -offsetU)
	}
	p.Spectrograph.XCenterPx -= float64(offsetU) * p.Spectrograph.UStepPx
	if len(rows) > 0 {
		f.Target.Closed = nil
	}
	f.scenery()
}

// Tiny is a field whose night is made in a fraction of a second: 23 elements, 31
// science frames, 72 x 16 pixels.
func Tiny() (*Field, error) {
	f, err := load("optical", "demo")
	if err != nil {
		return nil, err
	}
	p := f.Profile
	p.DMD.Columns, p.DMD.Rows = 50, 12
	p.Spectrograph.XCenterPx, p.Spectrograph.YCenterPx = 35.6, 7.7
	p.Spectrograph.CenterNM = 500
	p.Grid = instrument.Grid{FirstNM: 496, StepNM: 0.5, Count: 16}
	TwoAmplifiers(&p.Detector, 72, 16)
	f.small()
	f.SetCode("m-sequence", 31, 8)
	f.scenery = func() {
		f.Scene = skyWithLines(p.Grid, 20.9, 2e-18)
		f.addStars(17, 500, 1)
	}
	f.scenery()
	return f, nil
}

// Faint makes the field's light so little that the detector's part of the
// variance rules: electrons a sample of sky on average, which Brightness has to
// confirm, no object, read noise of 1 e, gain of 1 e an ADU.
func (f *Field) Faint(skyMag float64) {
	for i := range f.Profile.Detector.Amplifiers {
		a := &f.Profile.Detector.Amplifiers[i]
		a.ReadNoiseE, a.GainEPerADU = 1, 1
	}
	f.Scene = &rehearse.Scene{SeeingFWHMArcsec: 1, Sky: rehearse.Sky{ContinuumABArcsec2: &skyMag}}
}

// Embedded is the field of an embedded profile, target and scene as they are.
func Embedded(profile, target, scene string) (*Field, error) {
	f, err := load(profile, target)
	if err != nil {
		return nil, err
	}
	f.Scene, err = rehearse.LoadScene(scene)
	return f, err
}

func load(profile, target string) (*Field, error) {
	p, err := instrument.Load(profile)
	if err != nil {
		return nil, err
	}
	t, err := sequence.LoadTarget(target)
	return &Field{Profile: p, Target: t, Scene: &rehearse.Scene{SeeingFWHMArcsec: 1}}, err
}

// small sets the exposures: one cycle of the code, calibrations without lamps.
func (f *Field) small() {
	t := f.Target
	t.Calibration = sequence.Calibration{
		Bias: sequence.BiasFrames{Count: 12}, Dark: sequence.DarkFrames{Count: 5, DwellSeconds: t.DwellSeconds},
		Arc: sequence.ArcFrames{Every: 1},
	}
	t.Code.Cycles, t.Code.ElementMirrors = 1, 2
	f.SetCode("m-sequence", smallV, smallDark)
}

// SetCode chooses the code.
func (f *Field) SetCode(family string, v, dark int) {
	f.Target.Code.Family, f.Target.Code.V, f.Target.Code.Dark = family, &v, &dark
}

// Elements is the number of elements of the chosen code.
func (f *Field) Elements() int { return *f.Target.Code.V - *f.Target.Code.Dark }

// TwoAmplifiers sizes a detector of two amplifiers, which keep their electronics:
// each reads half of the columns, with 16 overscan columns at the row's end.
func TwoAmplifiers(d *instrument.Detector, columns, rows int) {
	const overscan = 16
	half := columns / 2
	d.Columns, d.Rows = columns, rows
	d.Amplifiers[0].Data = instrument.Section{1, half, 1, rows}
	d.Amplifiers[1].Data = instrument.Section{half + 1, columns, 1, rows}
	d.Amplifiers[0].Overscan = instrument.Overscan{columns + 1, columns + overscan, 1, rows}
	d.Amplifiers[1].Overscan = instrument.Overscan{columns + overscan + 1, columns + 2*overscan, 1, rows}
}

// SkyOf gives the offsets from the target's position of a place in the field:
// u and w in arc seconds along the cube's first and second axis. East and north
// are those of section 9 of the design: the second axis points to the position
// angle ROTANG, and east lies towards -axis 1 at 0 unless the parity is -1.
func (f *Field) SkyOf(u, w float64) (east, north float64) {
	sin, cos := math.Sincos(f.Target.RotangDeg * math.Pi / 180)
	u *= float64(f.Profile.DMD.Parity)
	return -u*cos + w*sin, u*sin + w*cos
}

// HalfArcsec is half the field's extent along both axes of the cube.
func (f *Field) HalfArcsec() (u, w float64) {
	a := f.Profile.ArcsecPerU()
	w0, w1 := f.Profile.WRange()
	for _, r := range f.Target.Closed {
		if r.Element == nil && r.First <= w0 {
			w0 = r.Last + 1
		}
		if r.Element == nil && r.Last >= w1 {
			w1 = r.First - 1
		}
	}
	if field := f.Target.Field; field != nil && len(field.Rows) == 2 {
		w0, w1 = max(w0, field.Rows[0]), min(w1, field.Rows[1])
	}
	return a * float64(f.Elements()*f.Target.Code.ElementMirrors) / 2, a * float64(w1-w0+1) / 2
}

// StarPlaces are the places of the small fields' stars, in parts of the field's
// half extents. The last lies so near the edge that the field cuts its image.
var StarPlaces = [][2]float64{{-0.62, 0.55}, {0.58, 0.47}, {-0.55, -0.5}, {0.66, -0.58}, {0.03, -0.04}, {0.955, 0.02}}

// addStars puts stars of one magnitude at StarPlaces.
func (f *Field) addStars(mag, atNM, seeing float64) {
	f.Scene.SeeingFWHMArcsec = seeing
	halfU, halfW := f.HalfArcsec()
	for i, at := range StarPlaces {
		east, north := f.SkyOf(at[0]*halfU, at[1]*halfW)
		m := mag
		f.Scene.Sources = append(f.Scene.Sources, rehearse.Source{
			Kind: rehearse.KindStar, EastArcsec: east, NorthArcsec: north,
			ABMag: &m, AtNM: atNM, TemperatureK: 4000 + 2500*float64(i),
		})
	}
}

// addRing puts a nebula that recedes and turns around the field's middle. Its
// lines lie at a tenth, a quarter, and, as a blend of two, near two thirds of the
// grid.
func (f *Field) addRing(mag, flux float64) {
	halfU, halfW := f.HalfArcsec()
	at := func(part float64) float64 { return f.Profile.Grid.WavelengthNM(part * float64(f.Profile.Grid.Count)) }
	east, north := f.SkyOf(0.05*halfU, -0.08*halfW)
	f.Scene.Sources = append(f.Scene.Sources, rehearse.Source{
		Kind: rehearse.KindRing, EastArcsec: east, NorthArcsec: north,
		RadiusArcsec: 0.45 * halfW, WidthArcsec: 0.5 * halfW, ABMag: &mag, AtNM: at(0.5), TemperatureK: 9000,
		Lines: []rehearse.Line{
			{WavelengthNM: at(0.1), FluxWM2: flux, FWHMKmS: 40},
			{WavelengthNM: at(0.25), FluxWM2: 0.4 * flux, FWHMKmS: 40},
			{WavelengthNM: at(0.62), FluxWM2: flux, FWHMKmS: 40},
			{WavelengthNM: at(0.665), FluxWM2: 0.6 * flux, FWHMKmS: 40},
		},
		Velocity: rehearse.Velocity{SystemicKmS: 90, GradientKmSArcsec: 15, PADeg: 60},
	})
}

// skyWithLines is a sky of a continuum and three lines, two of them a blend
// that no fit parts.
func skyWithLines(g instrument.Grid, mag, flux float64) *rehearse.Scene {
	at := func(part float64) float64 { return g.WavelengthNM(part * float64(g.Count)) }
	return &rehearse.Scene{Sky: rehearse.Sky{
		ContinuumABArcsec2: &mag,
		Lines: []rehearse.SkyLine{
			{WavelengthNM: at(0.402), FluxWM2Arcsec2: flux},
			{WavelengthNM: at(0.844), FluxWM2Arcsec2: flux},
			{WavelengthNM: at(0.857), FluxWM2Arcsec2: 0.5 * flux},
		},
	}}
}
