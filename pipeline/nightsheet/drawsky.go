package nightsheet

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strings"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// skyMap draws the footprint: north up, east to the left.
type skyMap struct {
	drawing.SVG
	width, height  float64
	scale          float64 // points per arc second
	middle         Offset
	labels         *labels
	brightest      float64 // AB magnitude, rounded down; +Inf where no source has one
	outside, faint int     // sources beyond the drawing, sources without a continuum
}

// keyHeight is that of the key below the map.
const keyHeight = 36

// drawSky draws the field into a width and a height.
func (l *layout) drawSky(width, height float64) template.HTML {
	f := &l.sheet.Footprint
	m := &skyMap{width: width, height: height - keyHeight, labels: newLabels(l.regular), brightest: math.Inf(1)}
	m.frame(f.Outline)
	fmt.Fprintf(m, `<svg class="drawing" role="img" aria-label="The field on the sky" viewBox="0 0 %s %s" style="width:%spt;height:%spt">`, coord(width), coord(height), coord(width), coord(height))
	m.WriteString(`<defs><pattern id="closed" width="4" height="4" patternUnits="userSpaceOnUse"><path d="M0,4L4,0" class="hatch"/></pattern>` +
		`<pattern id="sentinel" width="4" height="4" patternUnits="userSpaceOnUse"><path d="M0,2L4,2" class="hatch"/></pattern></defs>`)
	m.Rect("border", 0.5, 0.5, width-1, m.height-1)
	m.polygon("field", f.Outline)
	for _, p := range f.Patches {
		m.polygon(p.Use, p.Outline)
	}
	for i, e := range f.Elements {
		if i > 0 && i < len(f.Elements)-1 { // the outline is there already
			m.strip(e)
		}
	}
	m.polygon("outline", f.Outline)
	m.compass()
	m.bar()
	if t := l.sheet.sequence.Target; t.Forecast != nil {
		m.sources(t.Forecast.Sources)
	}
	for _, e := range f.Elements {
		m.stripLabel(e, f.Elements)
	}
	m.marks(f.Marks)
	m.key(l, f)
	m.WriteString("</svg>")
	return template.HTML(m.String())
}

// frame makes the outline fill the drawing, with a margin for names of elements.
func (m *skyMap) frame(outline []Offset) {
	const margin = 30
	low, high := Offset{math.Inf(1), math.Inf(1)}, Offset{math.Inf(-1), math.Inf(-1)}
	for _, o := range outline {
		for i := range o {
			low[i], high[i] = min(low[i], o[i]), max(high[i], o[i])
		}
	}
	m.middle = Offset{(low[0] + high[0]) / 2, (low[1] + high[1]) / 2}
	m.scale = min((m.width-2*margin)/max(high[0]-low[0], 1e-3), (m.height-2*margin)/max(high[1]-low[1], 1e-3))
}

// at is the point of an offset.
func (m *skyMap) at(o Offset) (x, y float64) {
	return m.width/2 - (o[0]-m.middle[0])*m.scale, m.height/2 - (o[1]-m.middle[1])*m.scale
}

func (m *skyMap) polygon(class string, corners []Offset) {
	fmt.Fprintf(m, `<path class="%s" d="`, class)
	for i, o := range corners {
		x, y := m.at(o)
		fmt.Fprintf(m, "%c%s,%s", "ML"[min(i, 1)], coord(x), coord(y))
	}
	m.WriteString(`Z"/>`)
}

func (m *skyMap) strip(e Strip) {
	x0, y0 := m.at(e.Ends[0])
	x1, y1 := m.at(e.Ends[1])
	m.Line("strip", x0, y0, x1, y1)
}

// stripLabel writes an element's number beyond its first end.
func (m *skyMap) stripLabel(e Strip, all []Strip) {
	if e.Element%20 != 0 && e.Element != all[len(all)-1].Element && len(all) > 8 {
		return
	}
	x0, y0 := m.at(e.Ends[0])
	x1, y1 := m.at(e.Ends[1])
	dx, dy := x0-x1, y0-y1
	length := math.Hypot(dx, dy)
	x, y := x0+dx/length*9, y0+dy/length*9
	text := fmt.Sprint(e.Element)
	if box := m.labels.box(text, x, y); m.labels.free(box) && m.inside(box) {
		m.labels.take(box)
		m.Text("middle", x, y+2.6, text)
	}
}

func (m *skyMap) inside(b box) bool {
	return b.x0 > 1 && b.y0 > 1 && b.x1 < m.width-1 && b.y1 < m.height-1
}

// compass draws the arrows of north and east in the upper right corner.
func (m *skyMap) compass() {
	const length, beyond = 18, 25
	x, y := m.width-14, 36.0
	m.Arrow("arm", x, y, 0, -1, length)
	m.Arrow("arm", x, y, -1, 0, length)
	m.Text("middle", x, y-beyond+3, "N")
	m.Text("middle", x-beyond, y+2.6, "E")
	m.labels.take(box{x - beyond - 6, 2, x + 8, y + 6})
}

// bar draws a bar of a round number of arc seconds in the lower left corner.
func (m *skyMap) bar() {
	arcsec := drawing.RoundStep(m.width / 4 / m.scale)
	x, y := 7.0, m.height-6
	length := arcsec * m.scale
	m.Line("arm", x, y, x+length, y)
	m.Line("arm", x, y-3, x, y+3)
	m.Line("arm", x+length, y-3, x+length, y+3)
	text := number(arcsec) + "″"
	m.Text("start", x+length+4, y+2.6, text)
	m.labels.take(box{0, y - 6, x + length + 8 + m.labels.face.Width(text, labelPoints), y + 6})
}

// Discs have classMagnitude magnitudes each, the brightest first.
const (
	brightClasses  = 5
	classMagnitude = 2
)

func discRadius(class int) float64 { return 4.2 - 0.8*float64(class) }

// sources draws those of the forecast: stars as discs by brightness, the others as rings of
// their size as well.
func (m *skyMap) sources(list []scene.Source) {
	for i := range list {
		if mag := list[i].ABMag; mag != nil {
			m.brightest = min(m.brightest, *mag)
		}
	}
	m.brightest = math.Floor(m.brightest)
	for i := range list {
		s := &list[i]
		x, y := m.at(Offset{s.EastArcsec, s.NorthArcsec})
		if x < 4 || y < 4 || x > m.width-4 || y > m.height-4 {
			m.outside++
			continue
		}
		if size := m.size(s); size > 3 && x-size > 1 && y-size > 1 && x+size < m.width-1 && y+size < m.height-1 {
			fmt.Fprintf(m, `<circle class="extended" cx="%s" cy="%s" r="%s"/>`, coord(x), coord(y), coord(size))
		}
		if s.ABMag == nil {
			m.faint++
			fmt.Fprintf(m, `<path class="lines" d="M%s,%sl2.6,2.6l-2.6,2.6l-2.6,-2.6Z"/>`, coord(x), coord(y-2.6))
			continue
		}
		class := min(int((*s.ABMag-m.brightest)/classMagnitude), brightClasses-1)
		fmt.Fprintf(m, `<circle class="star" cx="%s" cy="%s" r="%s"/>`, coord(x), coord(y), coord(discRadius(class)))
		m.labels.take(box{x - 3, y - 3, x + 3, y + 3})
	}
}

// size is the radius at which an extended source is drawn, points; 0 of a star.
func (m *skyMap) size(s *scene.Source) float64 {
	if s.Kind == scene.KindGaussian {
		return s.WidthArcsec / 2 * m.scale
	}
	return s.RadiusArcsec * m.scale
}

// marks draws what is wanted: places that coincide share their letters.
func (m *skyMap) marks(list []Mark) {
	for i, mark := range list {
		if slices.ContainsFunc(list[:i], func(o Mark) bool { return o.Place == mark.Place }) {
			continue
		}
		var names []string
		for _, o := range list[i:] {
			if o.Place == mark.Place {
				names = append(names, o.Label)
			}
		}
		const most = 4
		if len(names) > most {
			names = append(names[:most], "…")
		}
		x, y := m.at(mark.Place)
		if x < 6 || y < 6 || x > m.width-6 || y > m.height-6 {
			continue
		}
		radius := min(max(mark.RadiusArcsec*m.scale, 5.5), x-2, y-2, m.width-x-2, m.height-y-2)
		fmt.Fprintf(m, `<circle class="halo" cx="%s" cy="%s" r="%s"/><circle class="ring" cx="%s" cy="%s" r="%s"/>`,
			coord(x), coord(y), coord(radius), coord(x), coord(y), coord(radius))
		m.markLabel(strings.Join(names, " "), x, y, radius)
	}
}

// markLabel writes a label at the nearest free place around a mark, with a line to it where
// that is not beside it; none where all is taken.
func (m *skyMap) markLabel(text string, x, y, radius float64) {
	half := m.labels.face.Width(text, labelPoints)/2 + 1
	for ring := range 7 {
		for k := range 12 {
			sin, cos := math.Sincos(math.Pi / 6 * float64(k))
			away := radius + 4 + 9*float64(ring)
			lx, ly := x+cos*(away+half), y-sin*(away+2)
			b := m.labels.box(text, lx, ly)
			if !m.inside(b) || !m.labels.free(b) {
				continue
			}
			m.labels.take(b)
			if ring > 0 {
				m.Line("leader", x+cos*radius, y-sin*radius, lx-cos*half, ly+sin*4)
			}
			m.WriteString(`<g class="mark">`)
			m.Text("middle", lx, ly+2.6, text)
			m.WriteString("</g>")
			return
		}
	}
}

// key explains the symbols below the map.
func (m *skyMap) key(l *layout, f *Footprint) {
	y, x := m.height+11, 2.0
	word := func(text string, symbol func(x, y float64), room float64) {
		width := room + 3 + l.regular.Width(text, labelPoints)
		if x > 2 && x+width > m.width {
			x, y = 2, y+11
		}
		symbol(x+room/2, y-2.6)
		m.Text("start", x+room+3, y, text)
		x += width + 9
	}
	word("every tenth element", func(x, y float64) { m.Line("strip", x-6, y, x+6, y) }, 12)
	for _, use := range []struct{ use, text string }{{sequence.UseClosed, "closed"}, {sequence.UseSentinel, "sentinel rows"}} {
		if slices.ContainsFunc(f.Patches, func(p Patch) bool { return p.Use == use.use }) {
			word(use.text, func(x, y float64) { m.Rect(use.use, x-6, y-3, 12, 6) }, 12)
		}
	}
	if len(f.Marks) > 0 {
		word("wanted", func(x, y float64) {
			fmt.Fprintf(m, `<circle class="ring" cx="%s" cy="%s" r="3.6"/>`, coord(x), coord(y))
		}, 9)
	}
	if !math.IsInf(m.brightest, 0) {
		for class := 0; class < brightClasses; class += 2 {
			text := fmt.Sprintf("AB %.0f", m.brightest+classMagnitude*float64(class))
			switch class {
			case 0:
				text = "source of " + text
			case brightClasses - 1:
				text += " or fainter"
			}
			word(text, func(x, y float64) {
				fmt.Fprintf(m, `<circle class="star" cx="%s" cy="%s" r="%s"/>`, coord(x), coord(y), coord(discRadius(class)))
			}, 9)
		}
	}
	if m.faint > 0 {
		word("lines only", func(x, y float64) {
			fmt.Fprintf(m, `<path class="lines" d="M%s,%sl2.6,2.6l-2.6,2.6l-2.6,-2.6Z"/>`, coord(x), coord(y-2.6))
		}, 9)
	}
	if m.outside > 0 {
		word(plural(m.outside, "source")+" beyond the drawing", func(float64, float64) {}, 0)
	}
}
