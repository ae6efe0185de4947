package report

import (
	"cmp"
	"fmt"
	"html/template"
	"math"
	"slices"
	"strings"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/product"
)

// darkFacts is what the dark columns told, beyond the figures that are always there.
func darkFacts(q product.Quality) []fact {
	var all []fact
	if q.RestoredGrowth != nil {
		all = append(all, fact{"Growth of the noise by restored frames", fmt.Sprintf("%.3g times", *q.RestoredGrowth)})
	}
	if q.ResidualLight != "" {
		all = append(all, fact{"Light without open mirrors, taken off by", string(q.ResidualLight)})
	}
	if e := q.ErrorScale; e != nil {
		all = append(all, fact{"Error scale (scatter of dark columns over their variance; 1 is due)",
			fmt.Sprintf("mean %.3f, most %.3g; VARIANCE is multiplied by it in %s of the pixels", e.Mean, e.Max, percent(e.Applied))})
	}
	if worst := worstSteps(q.DarkChi2Steps); len(worst) > 0 {
		all = append(all, fact{"Frames that fit the others worst (chi-square of dark columns; 1 is due)", strings.Join(worst, ", ")})
	}
	return all
}

// worstSteps names the steps of the largest chi-square.
func worstSteps(steps []product.StepChi2) []string {
	const named = 5
	var sorted []product.StepChi2
	for _, s := range steps {
		if s.Chi2 != nil {
			sorted = append(sorted, s)
		}
	}
	slices.SortStableFunc(sorted, func(a, b product.StepChi2) int { return cmp.Compare(*b.Chi2, *a.Chi2) })
	var names []string
	for _, s := range sorted[:min(named, len(sorted))] {
		names = append(names, fmt.Sprintf("step %d: %.2f", s.Step, *s.Chi2))
	}
	return names
}

// drawScale draws the map of the error scale over the detector, darker where it is
// larger; empty without one.
func drawScale(e *product.ErrorScale) template.HTML {
	if e == nil || len(e.Map) == 0 || len(e.Map[0]) == 0 {
		return ""
	}
	const width, height, left, top = 480.0, 200.0, 40.0, 10.0
	most := 2.0
	for _, row := range e.Map {
		for _, q := range row {
			if q != nil {
				most = math.Max(most, *q)
			}
		}
	}
	w, h := width/float64(len(e.Map[0])), height/float64(len(e.Map))
	var s drawing.SVG
	fmt.Fprintf(&s, `<svg class="picture" viewBox="0 0 560 250" role="img" aria-label="Error scale over the detector" xmlns="http://www.w3.org/2000/svg">`)
	for y, row := range e.Map {
		for x, q := range row {
			if q == nil {
				continue
			}
			// 1 is white, the largest black, in logarithms.
			dark := math.Log(math.Max(1, *q)) / math.Log(most)
			fmt.Fprintf(&s, `<rect x="%s" y="%s" width="%s" height="%s" fill="#111" fill-opacity="%s"><title>%s</title></rect>`,
				drawing.Coord(left+float64(x)*w), drawing.Coord(top+height-float64(y+1)*h), drawing.Coord(w), drawing.Coord(h), drawing.Coord(dark), figure(*q))
		}
	}
	s.Rect("frame", left, top, width, height)
	s.Text("middle", left+width/2, top+height+18, "detector column")
	s.Turned(left-12, top+height/2, "detector row")
	s.Text("start", left, top+height+36, fmt.Sprintf("white: 1 or less; black: %s", figure(most)))
	s.WriteString("</svg>")
	return template.HTML(s.String())
}
