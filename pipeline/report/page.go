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
	Style           template.CSS
	Object, Profile string
	Version, CPU    string
	What            string // cube, element cube
	HasCube         bool
	Facts           []fact
	Verdict         verdictView
	Pictures        []figureView
	Spectra         []figureView
	NoneGood        bool // pictures and spectra are of voxels that are not good
	HasSky          bool // lines of the sky are marked
	Sums            []sumView
	SumPlaces       []string
	SumsNote        string
	Ledger          ledgerView
	Timeline        template.HTML
	ThroughputFacts []fact
	Dark            []figureView
	DarkFacts       []fact
	Waves           []figureView
	FlagFigures     []figureView
	Flags           []flagShare
	Quality         []fact
	Calibration     []fact
	OnSky           []fact
	Forecast        *forecastView
	Settings        []fact
	Inputs          []product.Input
	Stages          []stageView
	StagesMeasured  bool // where their time went
	TotalSeconds    string
	TotalBytes      string
	Rate            string
}

// verdictView is the verdict with its sign, and the sentences behind it.
type verdictView struct {
	Verdict
	Sign   template.HTML
	Checks []checkView
	Notes  []string // what else is known for and against the product
	Look   []string // reasons and warnings, in the run's own words
	Exit   string
}

// checkView is a check with its sign.
type checkView struct {
	Check
	Sign template.HTML
}

// figureView is a figure with its caption.
type figureView struct {
	Title, Caption string
	Drawing        template.HTML
}

// fact is a name with its value.
type fact struct{ Name, Value string }

type stageView struct {
	Name, Seconds, Bytes, Rate           string
	Reading, Computing, Writing, Waiting string
	Bottleneck                           string
}

// newPage fills in all that does not come from the cube.
func newPage(in Input) *page {
	p := &page{
		Style: template.CSS(pageCSS), Object: in.Schema.Object, Profile: in.Profile,
		Version: in.Run.Version, CPU: in.Run.CPULevel, What: "element cube",
		Ledger: viewLedger(in.Ledger), Quality: qualityFacts(in.Run.Quality), Calibration: calibrationFacts(in.Run.Calibration),
		DarkFacts: darkFacts(in.Run.Quality), Timeline: drawTimeline(in.Ledger, in.Throughput),
		Forecast: viewForecast(in.Run.Forecast),
		OnSky:    slices.Concat(skyFacts(in.Run.Sky), fluxFacts(in.Run.Flux), starFacts(in.Run.Stars)),
		Settings: flatten("", in.Run.Settings), Inputs: in.Run.Inputs, Verdict: viewVerdict(in),
	}
	if in.Run.Throughput != nil {
		p.ThroughputFacts = throughputFacts(in.Run.Throughput)
	}
	if c := in.Run.Calibration; c != nil {
		p.addWaves(c.Arcs)
	}
	return p
}

// viewVerdict puts the verdict and what is behind it into words.
func viewVerdict(in Input) verdictView {
	v := verdictView{Verdict: Judge(in.Run, in.Ledger), Exit: exitSentence(in)}
	v.Sign = sign(v.Trust, 40)
	for _, c := range v.Verdict.Checks {
		v.Checks = append(v.Checks, checkView{c, sign(c.Level, 15)})
	}
	if in.Run.Combined != nil {
		v.Notes = combinedSentences(in)
	} else {
		v.Notes = []string{framesSentence(in.Ledger)}
		if t := in.Run.Throughput; t != nil {
			v.Notes = append(v.Notes, sentence(t.Verdict))
		}
	}
	v.Notes = append(v.Notes, onSkySentences(in.Run)...)
	for _, w := range slices.Concat(in.Degraded, in.Run.Warnings) {
		if s := sentence(w); !slices.Contains(v.Look, s) {
			v.Look = append(v.Look, s)
		}
	}
	return v
}

// sign is a drawing that says a level without words or colours: a disc with a tick, a
// triangle with a stroke, a square with a cross.
func sign(level Trust, size int) template.HTML {
	shape, words := `<circle cx="20" cy="20" r="19"/><path d="M11 21l6 7 12-15"/>`, "well"
	switch level {
	case TrustLook:
		shape, words = `<path class="outline" d="M20 3L38 37H2Z"/><path class="ink" d="M20 15v11M20 30v3.5"/>`, "look"
	case TrustNo:
		shape, words = `<rect x="1" y="1" width="38" height="38"/><path d="M10 10l20 20M30 10l-20 20"/>`, "not well"
	}
	return template.HTML(fmt.Sprintf(`<svg class="sign" viewBox="0 0 40 40" width="%d" height="%d" role="img" aria-label="%s" xmlns="http://www.w3.org/2000/svg">%s</svg>`, size, size, words, shape))
}

// addWaves shows the residuals of the arcs.
func (p *page) addWaves(a *product.Arcs) {
	for _, f := range []figureView{
		{"Over elements and rows", "Mean residual of the lamp's lines (measured less fitted, px) by element and detector row: discs where it is positive, rings where it is negative, the larger the farther from 0.", drawArcPlaces(a)},
		{"Over wavelength", "Mean residual of each line; the bar is the scatter of its centroids.", drawArcLines(a)},
	} {
		if f.Drawing != "" {
			p.Waves = append(p.Waves, f)
		}
	}
	if len(p.Waves) > 0 {
		p.Waves[0].Caption += " " + arcWords(a)
	}
}

// addDark shows what the dark columns tell, on a detector of so many columns and rows.
func (p *page) addDark(run *product.Run, columns, rows int) {
	q := run.Quality
	for _, f := range []figureView{
		{"Held out", "Chi-square of dark columns that no fit has seen, before (ring) and after (disc) each correction of the frames that was tried, and in the cube before any error scale: 1 is due (dashed).", drawHeldOut(run.Throughput, q.DarkChi2Heldout)},
		{"By step", "Chi-square of each frame's part in the dark columns, which must decode to zero: 1 is noise (dashed), more is a frame that does not fit the others.", drawStepChi2(q.DarkChi2Steps)},
		{"Pulls", pullWords(q.DarkPulls), drawPulls(q.DarkPulls)},
		{"Error scale", "Map of the error scale q: scatter of the dark columns over what their variance says, in the mean of each stretch of the detector. Above 1 something changed from frame to frame that no factor of a frame explains: seeing, guiding, flexure. VARIANCE is multiplied by it where it is above 1 beyond chance. Crossed stretches were not measured.", drawScale(q.ErrorScale, columns, rows)},
	} {
		if f.Drawing != "" {
			p.Dark = append(p.Dark, f)
		}
	}
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
	p.HasCube, p.What = true, "cube"
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
