package rehearse

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"mirrorloom/calib/physics"
	"mirrorloom/configs"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// LampLine is a line of a calibration lamp.
type LampLine struct {
	Element string
	// WavelengthNM is in vacuum nm.
	WavelengthNM float64
	// Intensity is relative, of each element for itself.
	Intensity float64
}

// lampFiles are the lists of lines in configs/lamps, each line with its source.
var lampFiles = []string{"lamp_lines.csv", "lamp_lines_infrared.csv"}

const lampFolder = "lamps"

// readLampLines reads the embedded lists.
func readLampLines() ([]LampLine, error) {
	var lines []LampLine
	for _, name := range lampFiles {
		data, err := configs.ReadFile(lampFolder, name)
		if err != nil {
			return nil, err
		}
		records, err := csv.NewReader(bytes.NewReader(data)).ReadAll()
		if err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		for i, r := range records[1:] {
			nm, errNM := strconv.ParseFloat(r[3], 64)
			intensity, errI := strconv.ParseFloat(r[4], 64)
			if errNM != nil || errI != nil || !(nm > 0) || !(intensity > 0) {
				return nil, fmt.Errorf("%s: row %d is no lamp line", name, i+2)
			}
			lines = append(lines, LampLine{r[0], nm, intensity})
		}
	}
	return lines, nil
}

// continuumLamps are the names of the lamp whose light is that of a black body
// of lampKelvin.
var continuumLamps = []string{"continuum", "halogen"}

const lampKelvin = 2900

// Lines of a real lamp, against the list: seeded, unless --perfect.
const (
	lampMissing   = 0.10 // part of the listed lines that it lacks
	lampUnknown   = 0.05 // part that it has besides, unlisted
	lampIntensity = 3.0  // factor by which intensities may be off, either way
)

// lampLevel is the charge of the brightest pixel of the brightest step of each
// kind with a lamp, against saturation: whoever plans a night chooses the lamp's
// filter so.
const lampLevel = 0.6

// lampElements splits a name such as NeAr into the elements of the list; nil
// where it is none.
func lampElements(name string, lines []LampLine) []string {
	var elements []string
	for rest := name; rest != ""; {
		found := ""
		for _, l := range lines {
			if strings.HasPrefix(rest, l.Element) {
				found = l.Element
			}
		}
		if found == "" || slices.Contains(elements, found) {
			return nil
		}
		elements, rest = append(elements, found), rest[len(found):]
	}
	return elements
}

// newLampLight builds the light of a lamp of relative brightness: a continuum of
// 1 photon per nm and mirror at the band's middle, or lines of which the
// brightest of each element within the band has 1 photon a mirror.
//
// The listed intensities are eye estimates that span four decades; their square
// roots are taken, which keeps weak lines measurable.
func (o *optics) newLampLight(name string, seed uint64, perfect bool) (*light, error) {
	l := &light{efficiency: o.profile.Spectrograph.Throughput.At}
	if slices.Contains(continuumLamps, name) {
		middle := physics.PlanckPhotons(o.geometry.CenterNM, lampKelvin)
		b := o.newBand(func(nm float64) float64 { return physics.PlanckPhotons(nm, lampKelvin) / middle }, l.efficiency)
		l.objects = []emitter{{image: uniformImage(1), band: b}}
		return l, nil
	}
	lines, err := readLampLines()
	if err != nil {
		return nil, err
	}
	elements := lampElements(name, lines)
	if elements == nil {
		return nil, fmt.Errorf("lamp %q is unknown; name one of %s, or elements of the list like Ne or NeAr", name, strings.Join(continuumLamps, ", "))
	}
	var seen []emission
	for _, element := range elements {
		seen = append(seen, lampEmission(o.profile, lines, element, seed, perfect)...)
	}
	if len(seen) == 0 {
		return nil, fmt.Errorf("lamp %q has no line in the band of profile %s; choose another lamp", name, o.profile.Name)
	}
	l.objects = []emitter{{image: uniformImage(1), lines: seen}}
	return l, nil
}

// lampEmission lists the lines of an element within the band.
func lampEmission(p *instrument.Profile, lines []LampLine, element string, seed uint64, perfect bool) []emission {
	var list []emission
	brightest := 0.0
	for _, l := range lines {
		if l.Element == element && p.Spectrograph.Throughput.At(l.WavelengthNM) > 0 {
			list = append(list, emission{nm: l.WavelengthNM, photons: math.Sqrt(l.Intensity)})
			brightest = math.Max(brightest, math.Sqrt(l.Intensity))
		}
	}
	for i := range list {
		list[i].photons /= brightest
	}
	if perfect || len(list) == 0 {
		return list
	}
	return realLamp(list, newStream(seed, "lamp "+element, 0, 0), p.Grid)
}

// realLamp takes lines away, adds unlisted ones and changes intensities.
func realLamp(list []emission, pcg interface{ Uint64() uint64 }, grid instrument.Grid) []emission {
	random := func() float64 { return (float64(pcg.Uint64()>>11) + 0.5) / (1 << 53) }
	var kept []emission
	unknown := 0
	for _, l := range list {
		missing, extra, factor := random(), random(), math.Pow(lampIntensity, 2*random()-1)
		if missing >= lampMissing {
			kept = append(kept, emission{nm: l.nm, photons: l.photons * factor})
		}
		if extra < lampUnknown {
			unknown++
		}
	}
	if len(kept) == 0 {
		kept = list[:1]
	}
	for range unknown {
		nm := grid.WavelengthNM(0) + random()*(grid.LastNM()-grid.WavelengthNM(0))
		kept = append(kept, emission{nm: nm, photons: 0.5 * random()})
	}
	return kept
}

// lampScale is the factor that brings a lamp to lampLevel in the brightest of
// its steps, judged by the middle rows of each range of rows that open; 0 where
// no light reaches them.
func (o *optics) lampScale(l *light, b *beams, steps []int) float64 {
	brightest := 0.0
	for _, y := range b.middleRows(o) {
		brightest = math.Max(brightest, o.brightest(l, b, steps, y))
	}
	if brightest == 0 {
		return 0
	}
	return lampLevel * fullWellE(o.profile.Detector) / brightest
}

// middleRows are the detector rows in the middle of each run of mirror rows of
// one class that open, as far as they lie on the detector.
func (b *beams) middleRows(o *optics) []int {
	lowest, highest := o.mirrorRows(0, float64(o.rows-1))
	var rows []int
	first := lowest
	for w := lowest; w <= highest; w++ {
		if w < highest && b.class[w+1-b.wFirst] == b.class[w-b.wFirst] {
			continue
		}
		if b.class[w-b.wFirst] >= 0 {
			y := int(math.Round((o.geometry.row(first) + o.geometry.row(w)) / 2))
			rows = append(rows, min(max(y, 0), o.rows-1))
		}
		first = w + 1
	}
	return rows
}

// brightest is the most that a pixel of row y gets in any of the steps.
func (o *optics) brightest(l *light, b *beams, steps []int, y int) float64 {
	s := o.newStrip(y, y+1)
	for k := range s.mirrors {
		o.prepareMirror(s, k)
	}
	o.prepareRow(s, 0)
	lights := o.newDensities(len(s.mirrors))
	scratch := make([]float64, o.axis.n)
	var rows rowsOf[float32]
	rows[layerMain] = make([][]float32, len(b.list))
	for i := range b.list {
		if i == b.rest {
			continue
		}
		for k, m := range s.mirrors {
			first, last, keep := b.mirrors(i, m.w, false)
			o.collect(&lights[k], l.objects, l.efficiency, m, first, last, keep)
		}
		rows[layerMain][i] = make([]float32, o.columns)
		o.drawRow(rows[layerMain][i], &s.rows[0], lights, o.spread.pixel, scratch)
	}
	most := 0.0
	sum := make([]float64, o.columns)
	for _, k := range steps {
		m := b.newMixture(b.open(o.seq, shown{step: k}), false, false)
		mix(sum, m, &rows, nil)
		most = math.Max(most, slices.Max(sum)*o.seq.Steps[k].ExptimeSeconds)
	}
	return most
}

// fullWellE is the charge at which the first amplifier's pixels count as
// saturated, electrons.
func fullWellE(d instrument.Detector) float64 {
	least := math.Inf(1)
	for _, a := range d.Amplifiers {
		least = math.Min(least, (d.SaturationADU-a.BiasADU)*a.GainEPerADU)
	}
	return least
}

// lampKey tells lamps apart: the same lamp has a filter of its own for flats and
// for arcs.
type lampKey struct {
	kind sequence.Kind
	lamp string
}

// lampSteps groups the indices of the lamp frames.
func lampSteps(seq *sequence.Sequence) (keys []lampKey, steps map[lampKey][]int) {
	steps = map[lampKey][]int{}
	for i, st := range seq.Steps {
		if st.Kind != sequence.Flat && st.Kind != sequence.Arc {
			continue
		}
		key := lampKey{st.Kind, st.Lamp}
		if steps[key] == nil {
			keys = append(keys, key)
		}
		steps[key] = append(steps[key], i)
	}
	return keys, steps
}
