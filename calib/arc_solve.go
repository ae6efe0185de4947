package calib

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// ArcRule says what the instrument's band is and how far it may be from nominal.
type ArcRule struct {
	// FirstNM and LastNM bound the band that is to be calibrated, vacuum nm. Lines a
	// tenth of it beyond are believed too.
	FirstNM, LastNM float64
	// FWHMPx is the expected width of a line: nearer lines are not told apart.
	FWHMPx float64
	// ShiftPx and Scale bound the search: the light's offset along x in px and the
	// relative error of the dispersion.
	ShiftPx, Scale float64
}

// DefaultArcRule searches 18 px and 2.5 %: 15 px and 2 % with a margin.
func DefaultArcRule(firstNM, lastNM, fwhmPx float64) ArcRule {
	return ArcRule{FirstNM: firstNM, LastNM: lastNM, FWHMPx: fwhmPx, ShiftPx: 18, Scale: 0.025}
}

// SolveArcs identifies the peaks of all frames together and fits the model to them.
//
//  1. Peaks are followed along the rows; the slant that is common to all is taken out.
//  2. Shift and scale of the nominal dispersion are found by voting over all frames.
//  3. The linear model is fitted to the centroids of all rows, lines are assigned
//     anew, and so on until nothing changes; centroids and lines that stand out are
//     left out (see arcFit).
//
// What the data leave open is an *ArcError: no lines, another lamp, no certain match.
// Other errors are the caller's.
func SolveArcs(nominal Geometry, frames []ArcFrame, rule ArcRule) (*ArcSolution, error) {
	if !(rule.LastNM > rule.FirstNM) || !(rule.FWHMPx > 0) || !(rule.ShiftPx > 0) || !(rule.Scale > 0) || nominal.D[0] == 0 || nominal.X_e == 0 {
		return nil, fmt.Errorf("arc: the rule %+v and a nominal dispersion of %g px/nm, %g px an element, allow no fit", rule, nominal.D[0], nominal.X_e)
	}
	s := &solver{nominal: nominal, rule: rule, frames: frames}
	if err := s.recognize(); err != nil {
		return nil, err
	}
	if err := s.refine(); err != nil {
		return nil, err
	}
	return s.solution(), nil
}

// solver carries the work of SolveArcs.
type solver struct {
	nominal  Geometry
	rule     ArcRule
	frames   []ArcFrame
	tracks   []track
	features [][]feature
	match    ArcMatch
	tilt     float64
	smile    float64
	fit      *arcFit
}

// halfBand is h of the fit: the farthest wavelength of the band from L_c.
func (s *solver) halfBand() float64 {
	return max(math.Abs(s.rule.FirstNM-s.nominal.L_c), math.Abs(s.rule.LastNM-s.nominal.L_c))
}

// recognize finds tracks, slant and match.
func (s *solver) recognize() error {
	slant := func(y float64) float64 {
		q := y - s.nominal.Y_c
		return q * (s.nominal.SlitTilt + s.nominal.Smile*q)
	}
	margin := 0.1 * (s.rule.LastNM - s.rule.FirstNM)
	with := 0
	for i := range s.frames {
		f := &s.frames[i]
		lines := slices.DeleteFunc(slices.Clone(f.Lines), func(l LampLine) bool {
			return !(l.VacuumNM > s.rule.FirstNM-margin && l.VacuumNM < s.rule.LastNM+margin && l.Intensity > 0)
		})
		s.features = append(s.features, features(lines, math.Abs(s.nominal.D[0]), s.rule.FWHMPx))
		tracks := followTracks(i, f, slant)
		if len(tracks) > 0 {
			with++
		}
		s.tracks = append(s.tracks, tracks...)
	}
	if len(s.tracks) == 0 {
		return &ArcError{What: "no line was seen in any arc frame"}
	}
	s.tilt, s.smile, _ = straighten(s.tracks, &s.nominal)
	m := matcher{nominal: &s.nominal, tracks: s.tracks, features: s.features, rule: s.rule, frames: with}
	var err error
	s.match, err = m.match()
	return err
}

// Assignment: a track is the line whose predicted place is nearest, within this many
// px at first and at the end.
const (
	assignFirst = 1.2
	assignLast  = 0.4
)

// refine assigns and fits in turns.
func (s *solver) refine() error {
	h := s.halfBand()
	predict := func(t *track, nm float64) float64 {
		g := &s.nominal
		return g.X_c + s.match.ShiftPx + g.X_e*(float64(t.element)-g.J_c) + (1+s.match.Scale)*g.disperse(nm-g.L_c)
	}
	var last []int
	tolerance := assignFirst
	for range maxSteps {
		assigned := s.assign(predict, tolerance)
		if tolerance == assignLast && slices.Equal(assigned, last) {
			break
		}
		last = assigned
		s.fit = s.newFit(assigned, h)
		if s.fit.lines < leastLines {
			return &ArcError{What: fmt.Sprintf("%d lines of the lamp stand clear of others; %d are needed", s.fit.lines, leastLines), Match: s.match}
		}
		if !s.fit.solve() {
			return &ArcError{What: "the lines do not fix the model", Match: s.match}
		}
		if err := s.judgeFit(); err != nil {
			return err
		}
		p := s.fit.p
		predict = func(t *track, nm float64) float64 {
			row := s.designRow(t.element, 0, 0, nm, h)
			return s.nominal.X_c + dotRow(&row, p)
		}
		for i := range s.tracks {
			s.tracks[i].x = s.tracks[i].crossing(s.nominal.Y_c, p.AtVec(5), p.AtVec(6))
		}
		tolerance = max(assignLast, tolerance/1.5)
	}
	return nil
}

// mostLineError is the largest error of lines, px, of a true identification: by
// chance they scatter by half of assignLast.
const mostLineError = 0.1

// judgeFit refuses a fit that too few lines agree on.
func (s *solver) judgeFit() error {
	kept := 0
	for _, dropped := range s.fit.dropped {
		if !dropped {
			kept++
		}
	}
	lineError := math.Sqrt(s.fit.lineVar)
	if kept < leastLines || 2*kept < s.fit.lines || lineError > mostLineError {
		return &ArcError{What: fmt.Sprintf("%d of %d identified lines agree on a dispersion, to %.3f px: is this the lamp?", kept, s.fit.lines, lineError), Match: s.match}
	}
	return nil
}

// assign gives each track the index of its feature, -1 for none: each feature to the
// nearest track of its frame.
func (s *solver) assign(predict func(*track, float64) float64, tolerance float64) []int {
	assigned := make([]int, len(s.tracks))
	for i := range assigned {
		assigned[i] = -1
	}
	type key struct{ frame, feature int }
	taken := map[key]int{}
	miss := make([]float64, len(s.tracks))
	for i := range s.tracks {
		t := &s.tracks[i]
		miss[i] = math.Inf(1)
		for k, f := range s.features[t.frame] {
			if d := math.Abs(predict(t, f.nm) - t.x); d < miss[i] {
				miss[i], assigned[i] = d, k
			}
		}
		if miss[i] > tolerance {
			assigned[i] = -1
			continue
		}
		// Of two tracks on one feature the nearer one is it, unless they are parts of
		// one line above and below closed rows.
		at := key{t.frame, assigned[i]}
		if other, ok := taken[at]; ok && t.overlaps(&s.tracks[other]) {
			if miss[other] <= miss[i] {
				assigned[i] = -1
				continue
			}
			assigned[other] = -1
		}
		taken[at] = i
	}
	return assigned
}

// overlaps tells whether two tracks share a block.
func (t *track) overlaps(o *track) bool {
	for i := range t.peaks {
		for k := range o.peaks {
			if t.peaks[i].FirstRow == o.peaks[k].FirstRow {
				return true
			}
		}
	}
	return false
}

// newFit collects the centroids of clean features.
func (s *solver) newFit(assigned []int, h float64) *arcFit {
	f := &arcFit{prior: newPrior(&s.nominal, h)}
	numbers := map[float64]int{}
	for i := range s.tracks {
		if assigned[i] < 0 {
			continue
		}
		t := &s.tracks[i]
		line := s.features[t.frame][assigned[i]]
		if !line.clean {
			continue
		}
		number, ok := numbers[line.nm]
		if !ok {
			number = f.lines
			numbers[line.nm] = number
			f.lines++
			f.u = append(f.u, (line.nm-s.nominal.L_c)/h)
		}
		for k := range t.peaks {
			p := &t.peaks[k]
			f.data = append(f.data, measurement{
				ArcResidual: ArcResidual{Element: t.element, FirstRow: p.FirstRow, LastRow: p.LastRow, VacuumNM: line.nm,
					X: p.X, XErr: p.XErr, FWHM: p.FWHM, FWHMErr: p.FWHMErr, Flux: p.Flux},
				row:   s.designRow(t.element, p.FirstRow, p.LastRow, line.nm, h),
				value: p.X - s.nominal.X_c, err2: p.XErr * p.XErr, line: number,
			})
		}
	}
	return f
}

// designRow is the model's row for a block of detector rows; for 0, 0 that of q = 0.
// The mean of q^2 over n rows is that of the middle and (n^2-1)/12.
func (s *solver) designRow(element, firstRow, lastRow int, nm, h float64) [fitParameters]float64 {
	u := (nm - s.nominal.L_c) / h
	row := [fitParameters]float64{1, float64(element) - s.nominal.J_c, u, u * u, u * u * u}
	if lastRow > 0 {
		q, n := float64(firstRow+lastRow)/2-s.nominal.Y_c, float64(lastRow-firstRow+1)
		row[5], row[6] = q, q*q+(n*n-1)/12
	}
	return row
}

// solution turns the fit into Geometry's parameters.
func (s *solver) solution() *ArcSolution {
	f, h := s.fit, s.halfBand()
	g := s.nominal
	p := func(i int) float64 { return f.p.AtVec(i) }
	g.X_e, g.J_c = p(1), s.nominal.J_c-p(0)/p(1)
	g.D = [3]float64{p(2) / h, p(3) / (h * h), p(4) / (h * h * h)}
	g.SlitTilt, g.Smile = p(5), p(6)
	r := &ArcSolution{Geometry: g, Match: s.match, FirstNM: math.Inf(1), LastNM: math.Inf(-1), LineErrorPx: math.Sqrt(f.lineVar), ExtraErrorPx: math.Sqrt(f.extraVar)}
	// d(J_c, X_e, d1, d2, d3, tilt, smile)/dp.
	jacobian := mat.NewDense(int(arcParameters), fitParameters, nil)
	jacobian.Set(int(ArcJ_c), 0, -1/p(1))
	jacobian.Set(int(ArcJ_c), 1, p(0)/(p(1)*p(1)))
	for i, scale := range []float64{1, 1 / h, 1 / (h * h), 1 / (h * h * h), 1, 1} {
		jacobian.Set(int(ArcX_e)+i, 1+i, scale)
	}
	var half, full mat.Dense
	half.Mul(jacobian, f.cov)
	full.Mul(&half, jacobian.T())
	r.Covariance = mat.NewSymDense(int(arcParameters), nil)
	for a := range int(arcParameters) {
		for b := a; b < int(arcParameters); b++ {
			r.Covariance.SetSym(a, b, full.At(a, b))
		}
	}
	r.collect(f)
	r.Width = fitWidth(r)
	return r
}
