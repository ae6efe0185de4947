package forecast

import (
	"fmt"
	"math"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// deviceKey is what the light on the device depends on: where the field's middle lies, in
// halves of a u, and the air.
type deviceKey struct {
	middle2 int
	sight   sight
}

// deviceLight is the light on all mirrors of the device.
type deviceLight struct {
	light *Light
	// middle is the middle of the strip that is coded, u.
	middle         float64
	uFirst, uLast  int
	wFirst, wLast  int
	wMiddle, sigma float64
	pieces         []*piece
	leaks          map[int][]float64 // by trace row
}

// fieldKey is what the light of coded elements depends on besides: the strip, the width of
// elements, and the rows closed.
type fieldKey struct {
	deviceKey
	first, last, mirrors int
	closed               string
}

// fieldLight is the light of a coded strip.
type fieldLight struct {
	*deviceLight
	first, last, mirrors int
	// closed are rows of single elements or of all that no step opens.
	closed    []sequence.RowRange
	shares    map[int][]*share // by trace row: of each piece
	rows      map[int]*rowLight
	pixelRows map[int]*pixelRow
	squares   map[int][]float64 // by trace row
}

// field is the light of a candidate's strip.
func (l *Light) field(c Candidate, at sight) *fieldLight {
	at.airmass = 0 // its steps are the key
	first, last := l.strip(c)
	closed := l.closedRows(c)
	key := fieldKey{deviceKey{first + last, at}, first, last, c.ElementMirrors, fmt.Sprint(closed)}
	if f := l.fields[key]; f != nil {
		return f
	}
	f := &fieldLight{
		deviceLight: l.device(key.deviceKey), first: first, last: last, mirrors: c.ElementMirrors, closed: closed,
		shares: map[int][]*share{}, rows: map[int]*rowLight{}, pixelRows: map[int]*pixelRow{}, squares: map[int][]float64{},
	}
	if len(l.fields) >= mostKept {
		clear(l.fields)
	}
	l.fields[key] = f
	return f
}

// mostKept bounds the memory of what candidates share: some MB each for a large detector.
const mostKept = 16

func (l *Light) device(key deviceKey) *deviceLight {
	if d := l.devices[key]; d != nil {
		return d
	}
	d := &deviceLight{
		light: l, middle: float64(key.middle2) / 2, wMiddle: l.profile.WCenter(),
		sigma: l.profile.Spectrograph.LSFFWHMPx / fwhmPerSigma, leaks: map[int][]float64{},
	}
	d.uFirst, d.uLast = l.profile.URange()
	d.wFirst, d.wLast = l.profile.WRange()
	d.addSources(key.sight)
	d.addSky()
	if len(l.devices) >= mostKept {
		clear(l.devices)
	}
	l.devices[key] = d
	return d
}

// closedRows are the ranges of rows closed in coded steps: the target's, the candidate's and
// sentinels.
func (l *Light) closedRows(c Candidate) []sequence.RowRange {
	var list []sequence.RowRange
	for _, r := range l.target.SentinelRows {
		list = append(list, sequence.RowRange{First: r.First, Last: r.Last, Element: -1})
	}
	for _, rows := range [][]sequence.ClosedRow{l.target.Closed, c.Closed} {
		for _, r := range rows {
			element := -1
			if r.Element != nil {
				element = *r.Element
			}
			list = append(list, sequence.RowRange{First: r.First, Last: r.Last, Element: element})
		}
	}
	return list
}

// through is what becomes of a photon per m^2: electrons, with what the air leaves.
func (l *Light) through(air func(nm float64) float64) func(nm float64) float64 {
	area := l.profile.CollectingAreaM2()
	return func(nm float64) float64 { return area * l.profile.Throughput(nm) * air(nm) }
}

// everything is the part of a piece that takes all wavelengths.
func everything(float64) float64 { return 1 }

func (f *deviceLight) addSources(at sight) {
	l := f.light
	through := l.through(l.transmission(at))
	for i := range l.scene.Sources {
		s := &l.scene.Sources[i]
		var lines []emission
		for _, e := range s.Lines {
			// The flux is as observed: the photons are those of the shifted line.
			seen := e.WavelengthNM * physics.DopplerFactor(s.Velocity.SystemicKmS)
			lines = append(lines, emission{e.WavelengthNM, physics.LinePhotons(e.FluxWM2, seen), e.FWHMKmS})
		}
		photons, image, moves := l.photonsOf(s), l.imageOf(s), l.newMotion(s)
		for _, b := range f.bends(at) {
			p := f.newPiece(i, image)
			u, w := l.fieldPlace(s.EastArcsec, s.NorthArcsec)
			f.place(p, u+b.u, w+b.w)
			p.motion = moves
			l.spectrum(p, photons, lines, through, b.part)
			f.pieces = append(f.pieces, p)
		}
	}
}

func (f *deviceLight) addSky() {
	l := f.light
	sky := l.scene.Sky
	var photons func(nm float64) float64
	if sky.ContinuumABArcsec2 != nil {
		photons = l.photonsOf(&scene.Source{ABMag: sky.ContinuumABArcsec2, AtNM: l.profile.Spectrograph.CenterNM})
	}
	var lines []emission
	for _, e := range sky.Lines {
		lines = append(lines, emission{e.WavelengthNM, physics.LinePhotons(e.FluxWM2Arcsec2, e.WavelengthNM), e.FWHMKmS})
	}
	if photons == nil && lines == nil {
		return
	}
	p := f.newPiece(-1, nil)
	p.flat = l.profile.DMD.ArcsecPerMirror * l.profile.DMD.ArcsecPerMirror
	l.spectrum(p, photons, lines, l.through(everything), everything)
	f.pieces = append(f.pieces, p)
}

func (f *deviceLight) newPiece(source int, image image) *piece {
	return &piece{source: source, image: image, parts: map[int][]float64{}}
}

// place puts a piece's image on the device, arc seconds along u and w from the middle.
func (f *deviceLight) place(p *piece, u, w float64) {
	a := f.light.profile.ArcsecPerU()
	p.column, p.row = f.onDevice(f.middle+u/a, f.wMiddle+w/a)
}

// onDevice turns u and w into the device's column and row.
func (f *deviceLight) onDevice(u, w float64) (column, row float64) {
	if f.light.profile.DMD.Mounting == instrument.Diagonal {
		return (u - w) / 2, (u + w) / 2
	}
	return u, w
}

// bent is a part of the wavelengths and how far refraction moves it, arc seconds along u
// and w.
type bent struct {
	u, w float64
	part func(nm float64) float64
}

// bendsPerSeeing is how many pieces share the wavelengths of a source that refraction
// spreads over one seeing: between neighbours light is shared in proportion, which widens
// the image by (seeing/5)^2/6 at most, in the mean of squares.
const bendsPerSeeing = 5

func (f *deviceLight) bends(at sight) []bent {
	if at.centiTan == 0 {
		return []bent{{part: everything}}
	}
	l := f.light
	bend := l.bend(at)
	from, to := passband(l.profile)
	low, high := math.Inf(1), math.Inf(-1)
	const samples = 64
	for i := range samples + 1 {
		b := bend(from + (to-from)*float64(i)/samples)
		low, high = min(low, b), max(high, b)
	}
	n := 1 + int(math.Ceil((high-low)/l.scene.SeeingFWHMArcsec*bendsPerSeeing))
	step := (high - low) / float64(max(n-1, 1))
	sin, cos := math.Sincos(float64(at.parallacticDeg) * math.Pi / 180)
	zenithU, zenithW := l.fieldPlace(sin, cos)
	list := make([]bent, n)
	for i := range list {
		shift := low + float64(i)*step
		list[i] = bent{u: shift * zenithU, w: shift * zenithW, part: func(nm float64) float64 {
			if step == 0 {
				return 1
			}
			return max(0, 1-math.Abs(bend(nm)-shift)/step)
		}}
	}
	return list
}
