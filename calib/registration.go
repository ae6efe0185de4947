package calib

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// A PlaneMap takes places of a device (or of a cube, in arc seconds along its axes) to the
// plane that touches the sky (physics.Gnomonic):
//
//	east  = East[0] + East[1] u + East[2] w
//	north = North[0] + North[1] u + North[2] w.
type PlaneMap struct{ East, North [3]float64 }

// At maps a place.
func (m PlaneMap) At(u, w float64) (east, north float64) {
	return m.East[0] + m.East[1]*u + m.East[2]*w, m.North[0] + m.North[1]*u + m.North[2]*w
}

// Invert maps back; NaN for a map without an inverse.
func (m PlaneMap) Invert(east, north float64) (u, w float64) {
	det := m.East[1]*m.North[2] - m.East[2]*m.North[1]
	if det == 0 {
		return math.NaN(), math.NaN()
	}
	e, n := east-m.East[0], north-m.North[0]
	return (e*m.North[2] - n*m.East[2]) / det, (n*m.East[1] - e*m.North[1]) / det
}

// Shape are the numbers by which people know a map.
type Shape struct {
	// ScaleU and ScaleW are the lengths of one u and of one w in the plane.
	ScaleU, ScaleW float64
	// RotangDeg is the position angle of +w, north through east.
	RotangDeg float64
	// SkewDeg is by how much the angle of u and w exceeds 90 degrees.
	SkewDeg float64
	// Parity is 1 where east lies towards -u when +w points north, -1 where it does not.
	Parity int
}

// Shape describes the map.
func (m PlaneMap) Shape() Shape {
	w := math.Atan2(m.East[2], m.North[2])
	u := math.Atan2(m.East[1], m.North[1])
	s := Shape{
		ScaleU: math.Hypot(m.East[1], m.North[1]), ScaleW: math.Hypot(m.East[2], m.North[2]),
		RotangDeg: w * 180 / math.Pi, Parity: 1,
	}
	// +u has the position angle of +w less 90 degrees, more where the parity is -1.
	between := math.Mod(w-u+3*math.Pi, 2*math.Pi) - math.Pi
	if between < 0 {
		s.Parity = -1
	}
	s.SkewDeg = math.Abs(between)*180/math.Pi - 90
	return s
}

// StarMatch is a star's measured place and where it is in the plane.
type StarMatch struct {
	U, W        float64
	East, North float64
	Sigma       float64 // standard error of the place along either axis, in the plane's unit
}

// MapKind is how much of a PlaneMap is free.
type MapKind int

// The kinds, with the parameters that they fit. Shift and Pointing correct a map that is
// known: U and W are then the place in the plane, east and north, that it gave the star.
const (
	Shift      MapKind = iota // 2
	Pointing                  // 3: shift and a small turn (1 degree changes lengths by 1.5e-4)
	Similarity                // 4: shift, turn, one scale; and the parity
	Affine                    // 6
)

// MapRule says what is fitted and how far from its errors a star may be.
type MapRule struct {
	Kind   MapKind
	Sigmas float64
	// Parity of a Similarity where it is known, 1 or -1; 0: that which fits better, which
	// takes three stars.
	Parity int
}

// parities to try.
func (r MapRule) parities() []float64 {
	if r.Kind == Similarity && r.Parity == 0 {
		return []float64{1, -1}
	}
	return []float64{math.Copysign(1, float64(r.Parity))}
}

// fewest is how many stars fix a map.
func (r MapRule) fewest() int { return [...]int{1, 2, 2, 3}[r.Kind] }

// parameters is how many are fitted.
func (r MapRule) parameters() int { return [...]int{2, 3, 4, 6}[r.Kind] }

// MapFit is a map with what is known of it.
type MapFit struct {
	Map PlaneMap
	// Covariance of the parameters: for Affine East 0..2, then North 0..2; else the shifts
	// east and north, then the turn in radians or a and b (see rows). The scatter is in it
	// where it is above the errors.
	Covariance *mat.SymDense
	// Residuals are measured minus mapped, by star in the plane's unit.
	Residuals []Residual
	Used      int
	// RMS is of one coordinate, over the stars used; Chi2 per degree of freedom, NaN
	// without any.
	RMS, Chi2 float64
}

// Residual of a star.
type Residual struct {
	East, North float64
	Used        bool
}

// FitPlaneMap fits a map to matched stars by least squares. Wrong matches are thrown out:
// of the maps through as few stars as fix one, all of them while they are fewer than
// maxTrials and evenly chosen ones beyond, the fit starts with that whose
// median residual is least (least median of squares: Rousseeuw 1984, Journal of the American
// Statistical Association 79, 871); then a star belongs while it is within sigmas of its
// error, or of the scatter where that is larger, and the fit is repeated until the stars
// stay the same. Up to half of the stars less two may be wrong.
func FitPlaneMap(stars []StarMatch, rule MapRule) (*MapFit, error) {
	fewest := rule.fewest()
	if len(rule.parities()) > 1 {
		fewest++
	}
	if len(stars) < fewest {
		return nil, fmt.Errorf("registration: %d stars do not fix the map; give at least %d", len(stars), fewest)
	}
	for i, s := range stars {
		if !(s.Sigma > 0) || math.IsNaN(s.U+s.W+s.East+s.North) || math.IsInf(s.U+s.W+s.East+s.North+s.Sigma, 0) {
			return nil, fmt.Errorf("registration: star %d has no finite place with an error above 0: %+v", i+1, s)
		}
	}
	var best *MapFit
	least := 0.0
	for _, parity := range rule.parities() {
		f := mapFitter{stars: stars, rule: rule, parity: parity}
		fit, err := f.robust()
		if err != nil {
			continue
		}
		// The other parity fits two stars as well, but not the rest.
		if m := f.medianMiss(fit.Map); best == nil || m < least || m == least && fit.RMS < best.RMS {
			best, least = fit, m
		}
	}
	if best == nil {
		return nil, fmt.Errorf("registration: the %d stars lie on one place or one line, or do not agree on a map; give more, spread over the field", len(stars))
	}
	return best, nil
}

// maxTrials bounds the maps that are tried: 60 stars have 1770 pairs.
const maxTrials = 2000

type mapFitter struct {
	stars  []StarMatch
	rule   MapRule
	parity float64
}

// equation is a coordinate of a star in the plane: fixed + sum of factors times parameters.
type equation struct {
	factors []float64
	fixed   float64
}

// rows are the equations of a star.
//
//	Shift       east = u + e0,  north = w + n0
//	Pointing    east = u + e0 + t w,  north = w + n0 - t u
//	Similarity  east = e0 - p a u + b w,  north = n0 + p b u + a w,  p = parity, so that
//	            a and b are scale times the cosine and the sine of RotangDeg
//	Affine      see PlaneMap
func (f *mapFitter) rows(s StarMatch) (east, north equation) {
	u, w, p := s.U, s.W, f.parity
	switch f.rule.Kind {
	case Shift:
		return equation{[]float64{1, 0}, u}, equation{[]float64{0, 1}, w}
	case Pointing:
		return equation{[]float64{1, 0, w}, u}, equation{[]float64{0, 1, -u}, w}
	case Similarity:
		return equation{[]float64{1, 0, -p * u, w}, 0}, equation{[]float64{0, 1, w, p * u}, 0}
	}
	return equation{[]float64{1, u, w, 0, 0, 0}, 0}, equation{[]float64{0, 0, 0, 1, u, w}, 0}
}

// planeMap is the map of parameters in the order of rows: what rows makes of three places.
func (f *mapFitter) planeMap(parameters []float64) PlaneMap {
	at := func(u, w float64) (east, north float64) {
		e, n := f.rows(StarMatch{U: u, W: w})
		east, north = e.fixed, n.fixed
		for k, p := range parameters {
			east += e.factors[k] * p
			north += n.factors[k] * p
		}
		return east, north
	}
	e0, n0 := at(0, 0)
	eu, nu := at(1, 0)
	ew, nw := at(0, 1)
	return PlaneMap{East: [3]float64{e0, eu - e0, ew - e0}, North: [3]float64{n0, nu - n0, nw - n0}}
}

// robust finds the stars that agree and fits them.
func (f *mapFitter) robust() (*MapFit, error) {
	start, err := f.leastMedian()
	if err != nil {
		return nil, err
	}
	use := f.within(start, f.halfScatter(start))
	for range 20 {
		fit, err := f.solve(use)
		if err != nil {
			return nil, err
		}
		scatter := 1.0
		if fit.Chi2 > 1 { // it may be NaN
			scatter = math.Sqrt(fit.Chi2)
		}
		next := f.within(fit.Map, scatter)
		same := true
		for i := range use {
			same = same && use[i] == next[i]
		}
		if same {
			return fit, nil
		}
		use = next
	}
	return f.solve(use)
}

// miss is a star's distance from where a map puts it, in its own errors.
func (f *mapFitter) miss(m PlaneMap, i int) float64 {
	s := f.stars[i]
	east, north := m.At(s.U, s.W)
	return math.Hypot(east-s.East, north-s.North) / s.Sigma
}

// within tells which stars a map explains. A distance in two dimensions goes further than a
// coordinate: of normal errors it is above 1.1774 in half of the cases.
func (f *mapFitter) within(m PlaneMap, scatter float64) []bool {
	use := make([]bool, len(f.stars))
	for i := range use {
		use[i] = f.miss(m, i) <= f.rule.Sigmas*max(1, scatter)
	}
	return use
}

// halfScatter is the scatter, in errors of one coordinate, that makes the median distance.
func (f *mapFitter) halfScatter(m PlaneMap) float64 { return f.medianMiss(m) / 1.1774100225 }

func (f *mapFitter) medianMiss(m PlaneMap) float64 {
	miss := make([]float32, len(f.stars))
	for i := range miss {
		miss[i] = float32(f.miss(m, i))
	}
	return float64(selectAt(miss, len(miss)/2))
}

// leastMedian tries maps through as few stars as fix one.
func (f *mapFitter) leastMedian() (PlaneMap, error) {
	var best PlaneMap
	least := math.Inf(1)
	try := func(members ...int) {
		use := make([]bool, len(f.stars))
		for _, i := range members {
			use[i] = true
		}
		if fit, err := f.solve(use); err == nil {
			if m := f.medianMiss(fit.Map); m < least {
				least, best = m, fit.Map
			}
		}
	}
	n, size := len(f.stars), f.rule.fewest()
	total := 1
	for i := range size {
		total = total * (n - i) / (i + 1)
	}
	every, count := (total+maxTrials-1)/maxTrials, 0
	members := make([]int, size)
	var choose func(at, first int)
	choose = func(at, first int) {
		if at == size {
			if count++; count%every == 0 {
				try(members...)
			}
			return
		}
		for members[at] = first; members[at] <= n-size+at; members[at]++ {
			choose(at+1, members[at]+1)
		}
	}
	choose(0, 0)
	if math.IsInf(least, 1) {
		return best, errNoMap
	}
	return best, nil
}

var errNoMap = fmt.Errorf("registration: no map")

// solve fits the stars in use.
func (f *mapFitter) solve(use []bool) (*MapFit, error) {
	size := f.rule.parameters()
	normal, right := mat.NewSymDense(size, nil), mat.NewVecDense(size, nil)
	used := 0
	for i, s := range f.stars {
		if !use[i] {
			continue
		}
		used++
		east, north := f.rows(s)
		weight := 1 / (s.Sigma * s.Sigma)
		for _, e := range []struct {
			equation
			value float64
		}{{east, s.East}, {north, s.North}} {
			factors := mat.NewVecDense(size, e.factors)
			normal.SymRankOne(normal, weight, factors)
			right.AddScaledVec(right, weight*(e.value-e.fixed), factors)
		}
	}
	var chol mat.Cholesky
	const worstCondition = 1e14 // beyond it the stars are one place or one line
	if 2*used < size || !chol.Factorize(normal) || chol.Cond() > worstCondition {
		return nil, errNoMap
	}
	p := mat.NewVecDense(size, nil)
	if err := chol.SolveVecTo(p, right); err != nil {
		return nil, errNoMap
	}
	fit := &MapFit{Map: f.planeMap(p.RawVector().Data), Covariance: mat.NewSymDense(size, nil), Used: used}
	if err := chol.InverseTo(fit.Covariance); err != nil {
		return nil, errNoMap
	}
	f.judge(fit, use, size)
	return fit, nil
}

func (f *mapFitter) judge(fit *MapFit, use []bool, size int) {
	square, chi2 := 0.0, 0.0
	for i, s := range f.stars {
		east, north := fit.Map.At(s.U, s.W)
		r := Residual{East: s.East - east, North: s.North - north, Used: use[i]}
		fit.Residuals = append(fit.Residuals, r)
		if r.Used {
			d := r.East*r.East + r.North*r.North
			square += d
			chi2 += d / (s.Sigma * s.Sigma)
		}
	}
	fit.RMS = math.Sqrt(square / float64(2*fit.Used))
	fit.Chi2 = math.NaN()
	if freedom := 2*fit.Used - size; freedom > 0 {
		fit.Chi2 = chi2 / float64(freedom)
		if fit.Chi2 > 1 {
			fit.Covariance.ScaleSym(fit.Chi2, fit.Covariance)
		}
	}
}
