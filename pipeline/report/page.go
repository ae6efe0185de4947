package report

import (
	_ "embed" // the page's template and style
	"encoding/json"
	"fmt"
	"html/template"
	"maps"
	"math"
	"slices"
	"strconv"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

//go:embed page.html
var pageHTML string

//go:embed style.css
var pageCSS string

var pageTemplate = template.Must(template.New("report").Parse(pageHTML))

// page is what the template shows.
type page struct {
	Style            template.CSS
	Object, Profile  string
	Version, CPU     string
	HasCube          bool
	Facts            []fact
	Verdict          verdict
	Picture          template.HTML
	PictureNote      string
	Spectra          []spectrumView
	Sums             []sumView
	SumPlaces        []string
	SumsNote         string
	Flags            []flagShare
	Ledger           ledgerView
	Quality          []fact
	Calibration      []fact
	ErrorScale       template.HTML
	Throughput       template.HTML
	ThroughputFacts  []fact
	OnSky            []fact
	Forecast         *forecastView
	Settings         []fact
	Inputs           []product.Input
	Stages           []stageView
	StagesMeasured   bool // where their time went
	TotalSeconds     string
	TotalBytes, Rate string
}

// fact is a name with its value.
type fact struct{ Name, Value string }

type spectrumView struct {
	Label, Place string
	Chart        template.HTML
}

type stageView struct {
	Name, Seconds, Bytes, Rate           string
	Reading, Computing, Writing, Waiting string
	Bottleneck                           string
}

// newPage fills in all that does not come from the cube.
func newPage(in Input) *page {
	p := &page{
		Style: template.CSS(pageCSS), Object: in.Schema.Object, Profile: in.Profile,
		Version: in.Run.Version, CPU: in.Run.CPULevel,
		Ledger: viewLedger(in.Ledger), Quality: append(qualityFacts(in.Run.Quality), darkFacts(in.Run.Quality)...), ErrorScale: drawScale(in.Run.Quality.ErrorScale), Calibration: calibrationFacts(in.Run.Calibration),
		Forecast: viewForecast(in.Run.Forecast),
		OnSky:    slices.Concat(skyFacts(in.Run.Sky), fluxFacts(in.Run.Flux), starFacts(in.Run.Stars)),
		Settings: flatten("", in.Run.Settings), Inputs: in.Run.Inputs,
	}
	p.Verdict = judge(in, "element cube")
	return p
}

// gridWords describe a wavelength axis.
func gridWords(a product.SpectralAxis) string {
	g := a.Grid
	text := fmt.Sprintf("%g to %g nm in vacuum, %g nm a voxel", g.WavelengthNM(0), g.LastNM(), g.StepNM)
	if g.Axis == instrument.Air {
		text = fmt.Sprintf("%g to %g nm in air, %g nm a voxel", g.AxisNM(0), g.AxisNM(float64(g.Count-1)), g.StepNM)
	}
	if g.Spacing == instrument.Logarithmic {
		text += " at the first, growing in proportion"
	}
	switch a.Frame.Name {
	case product.Barycentric:
		text += fmt.Sprintf("; in the frame of the solar system's barycentre, from which the observer receded at %+.3f km/s", a.Frame.VelocityMS()/1000)
	case product.Heliocentric:
		text += fmt.Sprintf("; in the frame of the sun's centre, from which the observer receded at %+.3f km/s", a.Frame.VelocityMS()/1000)
	}
	return text
}

// addCube says that there is a cube and what it spans.
func (p *page) addCube(in Input) {
	p.HasCube, p.Verdict = true, judge(in, "cube")
	s := in.Schema
	east := "towards the picture's left where north is up"
	if s.Parity < 0 {
		east = "towards the picture's right where north is up (parity −1)"
	}
	p.Facts = []fact{
		{"Voxels", fmt.Sprintf("%d elements × %d detector rows × %d wavelengths", s.Elements, s.Rows, s.Grid.Count)},
		{"Wavelengths", gridWords(s.Axis())},
		{"Field", fmt.Sprintf("%.1f″ × %.1f″, voxels of %.3f″ × %.3f″", s.C1Deg*arcsecPerDeg*float64(s.Elements), s.C2Deg*arcsecPerDeg*float64(s.Rows), s.C1Deg*arcsecPerDeg, s.C2Deg*arcsecPerDeg)},
		{"Centre", fmt.Sprintf("RA %.6f°, Dec %+.6f° (ICRS)", s.RADeg, s.DecDeg)},
		{"Orientation", fmt.Sprintf("rows run to position angle %g°; east lies %s", s.RotangDeg, east)},
	}
}

const notMeasured = "not measured"

func qualityFacts(q product.Quality) []fact {
	real := func(x *float64, layout string) string {
		if x == nil {
			return notMeasured
		}
		return fmt.Sprintf(layout, *x)
	}
	share := func(x *float64) string {
		if x == nil {
			return notMeasured
		}
		return percent(*x)
	}
	hits := notMeasured
	if q.Hits != nil {
		hits = strconv.Itoa(*q.Hits)
	}
	return []fact{
		{"Good voxels, of all", percent(q.GoodFraction)},
		{"Good voxels, of those in coded rows with their wavelength on the detector", percent(q.CoveredGoodFraction)},
		{"Chi-square of dark columns that no fit has seen (1 is due)", real(q.DarkChi2Heldout, "%.4f")},
		{"Throughput of the frames, rms", share(q.ThroughputRMS)},
		{"Error of a frame's throughput", share(q.ThroughputErr)},
		{"Cosmic-ray hits found", hits},
		{"Samples restored", strconv.Itoa(q.Restored)},
		{"Science frames lost", strconv.Itoa(q.Lost)},
		{"Wavelength solution, rms", real(q.WavelengthRMSPx, "%.4f px")},
		{"Saturated pixels", strconv.Itoa(q.Saturated)},
		{"Bad pixels", strconv.Itoa(q.BadPixels)},
	}
}

// flatten lists settings by their key paths, in alphabetical order.
func flatten(prefix string, settings map[string]any) []fact {
	var all []fact
	for _, key := range slices.Sorted(maps.Keys(settings)) {
		name := prefix + key
		switch v := settings[key].(type) {
		case map[string]any:
			all = append(all, flatten(name+".", v)...)
		case string:
			all = append(all, fact{name, v})
		default:
			text, err := json.Marshal(v) // as run.json has it
			if err != nil {
				text = []byte(fmt.Sprint(v))
			}
			all = append(all, fact{name, string(text)})
		}
	}
	return all
}

// addStages lists the stages with their speed in 10^9 bytes per second.
func (p *page) addStages(stages []product.Stage) {
	var seconds float64
	var bytes int64
	for _, s := range stages {
		v := stageView{Name: s.Name, Seconds: fmt.Sprintf("%.2f", s.Seconds), Bytes: bytesText(s.Bytes), Rate: rate(s.Bytes, s.Seconds), Bottleneck: s.BottleneckWords()}
		if s.Bottleneck != "" {
			v.Reading, v.Computing = fmt.Sprintf("%.2f", s.ReadingS), fmt.Sprintf("%.2f", s.ComputingS)
			v.Writing, v.Waiting = fmt.Sprintf("%.2f", s.WritingS), fmt.Sprintf("%.2f", s.WaitingS)
			p.StagesMeasured = true
		}
		p.Stages = append(p.Stages, v)
		seconds += s.Seconds
		bytes += s.Bytes
	}
	p.TotalSeconds, p.TotalBytes, p.Rate = fmt.Sprintf("%.2f", seconds), bytesText(bytes), rate(bytes, seconds)
}

func rate(bytes int64, seconds float64) string {
	gigabytes := float64(bytes) / seconds / 1e9
	if bytes == 0 || math.IsInf(gigabytes, 0) || math.IsNaN(gigabytes) {
		return ""
	}
	return strconv.FormatFloat(gigabytes, 'g', 3, 64) + " GB/s"
}
