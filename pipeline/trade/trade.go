package trade

import (
	"cmp"
	"context"
	"fmt"
	"slices"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Request says what is held against each other.
type Request struct {
	Target  *sequence.Target
	Profile *instrument.Profile
	Light   *forecast.Light
	// Fields are those to be tried.
	Fields []Field
	// Given is the target's own candidate, nil where plan is to choose. It is judged as it
	// is, and its total time is the budget unless the target's limits have one.
	Given *forecast.Candidate
	// V and Dark are code.v and code.dark of a target that leaves the family open.
	V, Dark *int
	// DwellSeconds and Cycles are fixed for all candidates unless 0; with Given they are not
	// looked at.
	DwellSeconds float64
	Cycles       int
}

// Breach is a limit that a candidate breaks.
type Breach string

// The limits.
const (
	// BreachTime: no dwell is left in the budget.
	BreachTime Breach = "time"
	// BreachSaturation: the brightest pixel saturates, whatever the dwell.
	BreachSaturation Breach = "saturation"
	// BreachCycle: a cycle takes too long.
	BreachCycle Breach = "cycle"
	// BreachDark: there are too few dark columns.
	BreachDark Breach = "dark"
	// BreachSteps: a sequence has no room for so many exposures.
	BreachSteps Breach = "steps"
)

// Row is a candidate and what it gives.
type Row struct {
	Candidate forecast.Candidate `json:"candidate"`
	// Figure is the S/N that the aim is about; 0 where the candidate was not worked out.
	Figure float64 `json:"figure"`
	// OverSlit is Figure over that of the slit scan of the same elements, 0 for none.
	OverSlit float64 `json:"over_slit_scan"`
	// TotalSeconds and CycleSeconds are its times.
	TotalSeconds float64 `json:"total_s"`
	CycleSeconds float64 `json:"cycle_s"`
	// CycleLimit is how long a cycle may take.
	CycleLimit CycleLimit `json:"cycle_limit"`
	// Full is the brightest pixel over its saturation, Source the index of the source most
	// of it comes from (-1 for the sky).
	Full   float64 `json:"full"`
	Source int     `json:"source"`
	// PhotonPart is the part of the variance that is light's, a mean over what is wanted.
	PhotonPart float64 `json:"photon_part"`
	// LongestDwellSeconds is the dwell at which the brightest pixel saturates.
	LongestDwellSeconds float64 `json:"longest_dwell_s"`
	// Covered are sources that closed mirrors cover.
	Covered []int `json:"covered,omitempty"`
	// LossGrowth is by how much the noise grows when as many frames are lost as the limits
	// allow for, the worst of some random sets; 0 where it was not worked out.
	LossGrowth float64 `json:"loss_growth,omitempty"`
	// Given marks the target's own candidate, Chosen the one that is planned.
	Given  bool `json:"given,omitempty"`
	Chosen bool `json:"chosen,omitempty"`
	// Breaks is the limit that it breaks, "" for none; Why says how and Cure by what it
	// would be possible.
	Breaks Breach `json:"breaks,omitempty"`
	Why    string `json:"why,omitempty"`
	Cure   string `json:"cure,omitempty"`
}

// Trade is the whole comparison.
type Trade struct {
	// Aim is the target's, BudgetSeconds the time that all have.
	Aim           string  `json:"aim"`
	BudgetSeconds float64 `json:"budget_s"`
	// Rows are those within the limits, the best first, then the others.
	Rows []Row `json:"rows"`
	// Recommendation is one sentence.
	Recommendation string `json:"recommendation"`
}

// Compare works out every candidate of a request. Errors are those of forecasts and of ctx;
// that no row is within the limits is none.
func Compare(ctx context.Context, r Request) (*Trade, error) {
	limits := r.Target.Forecast.Limits
	w := &weighing{Request: r, limits: limits, budget: limits.TotalSeconds}
	t := &Trade{Aim: r.Target.Forecast.Aim}
	if r.Given != nil {
		if w.budget == 0 {
			w.budget = r.Light.Time(*r.Given).TotalSeconds
		}
		row, err := w.given(ctx, *r.Given)
		if err != nil {
			return nil, err
		}
		t.Rows = append(t.Rows, row)
	}
	t.BudgetSeconds = w.budget
	for _, f := range r.Fields {
		rows, err := w.field(ctx, f)
		if err != nil {
			return nil, err
		}
		for _, row := range rows {
			if own := t.Own(); own == nil || !same(own.Candidate, row.Candidate) {
				t.Rows = append(t.Rows, row)
			}
		}
	}
	t.sort()
	t.overSlit()
	return t, nil
}

// same tells whether two candidates are one.
func same(a, b forecast.Candidate) bool {
	return a.Family == b.Family && a.V == b.V && a.N == b.N && a.ElementMirrors == b.ElementMirrors && a.Cycles == b.Cycles && a.DwellSeconds == b.DwellSeconds && len(a.Closed) == 0 && len(b.Closed) == 0
}

// Best is the first row within the limits that is not the given one, nil for none.
func (t *Trade) Best() *Row {
	for i := range t.Rows {
		if r := &t.Rows[i]; r.Breaks == "" && !r.Given {
			return r
		}
	}
	return nil
}

// Own is the given row, nil for none.
func (t *Trade) Own() *Row {
	for i := range t.Rows {
		if t.Rows[i].Given {
			return &t.Rows[i]
		}
	}
	return nil
}

// Slit is the best slit scan of elements of so many mirrors that is within the limits, nil
// for none.
func (t *Trade) Slit(mirrors int) *Row {
	for i := range t.Rows {
		r := &t.Rows[i]
		if r.IsSlit() && r.Breaks == "" && !r.Given && r.Candidate.ElementMirrors == mirrors {
			return r
		}
	}
	return nil
}

// IsSlit tells whether a row is a slit scan.
func (r *Row) IsSlit() bool { return r.Candidate.Family == string(hadamard.SlitScan) }

func (t *Trade) sort() {
	slices.SortStableFunc(t.Rows, func(a, b Row) int {
		if (a.Breaks == "") != (b.Breaks == "") {
			if a.Breaks == "" {
				return -1
			}
			return 1
		}
		return cmp.Compare(b.Figure, a.Figure)
	})
}

func (t *Trade) overSlit() {
	for i := range t.Rows {
		if s := t.Slit(t.Rows[i].Candidate.ElementMirrors); s != nil && s.Figure > 0 {
			t.Rows[i].OverSlit = t.Rows[i].Figure / s.Figure
		}
	}
}

// Name is a candidate's code in words.
func Name(c forecast.Candidate) string {
	if c.Family == string(hadamard.SlitScan) {
		return fmt.Sprintf("the slit scan of %d elements", c.N)
	}
	return fmt.Sprintf("%s of v = %d", c.Family, c.V)
}
