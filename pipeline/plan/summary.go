package plan

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

// Summary is what the observer wants to know of a plan.
type Summary struct {
	Target  string `json:"target"`
	Profile string `json:"profile"`
	Code    Code   `json:"code"`
	// FieldArcsec is the field along the cube's first and second axis.
	FieldArcsec [2]float64 `json:"field_arcsec"`
	// ReadNoiseGain is the gain in S/N over a slit scan of the same field in the
	// same time where the detector's noise is all; PhotonThreshold how many
	// times brighter than the mean an element must be to gain where photon noise
	// is all, 0 where none does. Both are 0 for a slit scan.
	ReadNoiseGain   float64 `json:"read_noise_gain"`
	PhotonThreshold float64 `json:"photon_threshold"`
	// Kinds lists the steps by kind, without the kinds that do not occur.
	Kinds []KindTotal `json:"kinds"`
	Steps int         `json:"steps"`
	// Minutes includes the time to read the detector.
	Minutes float64 `json:"minutes"`
	// StartUTC and EndUTC bound the night, ISO 8601.
	StartUTC string `json:"start_utc"`
	EndUTC   string `json:"end_utc"`
	// Airmass is that of the field's centre at the first and at the end of the
	// last science step and the largest between; 0 below the horizon.
	Airmass [3]float64 `json:"airmass"`
	// RefStar is the reference star; nil where none is planned.
	RefStar *RefStar `json:"refstar,omitempty"`
	// Pointing is where the telescope is to be sent, so that the field lies where the
	// target says; nil without a registration.
	Pointing *PointingTo `json:"pointing,omitempty"`
	// Forecast is what the plan will give; nil where the target does not say what to
	// expect.
	Forecast *forecast.Result `json:"forecast,omitempty"`
	// Trade holds the plan against other codes and the slit scan; nil where the target does
	// not say what it wants.
	Trade *trade.Trade `json:"trade,omitempty"`
	// CycleLimits bound the time of a cycle, each rule once; nil without a forecast.
	CycleLimits []trade.CycleLimit `json:"cycle_limits,omitempty"`
	// Calibrations say whether the calibration frames are enough; nil where the target does
	// not say what it wants.
	Calibrations []CalibrationSize `json:"calibration_sizes,omitempty"`
	// ShortNights say what is lost where the night ends early, by order of the steps.
	ShortNights []ShortNight `json:"short_nights"`
	// Device is what the optics of the mirror array do.
	Device *Device `json:"device"`
	// Picked are the rows that were chosen by the sources of the forecast.
	Picked []PickedRows `json:"picked_rows,omitempty"`
	// Gigabytes is the size of the raw frames, 16 bits a pixel, in 1e9 bytes.
	Gigabytes float64 `json:"gigabytes"`
	// Masks is the number of distinct masks, 0 before they are written.
	Masks       int      `json:"masks"`
	SequenceSHA string   `json:"sequence_sha256"`
	Warnings    []string `json:"warnings"`
}

// Code is the code of a plan.
type Code struct {
	Family         string `json:"family"`
	V              int    `json:"v"`
	K              int    `json:"k"`
	L              int    `json:"l"`
	Poly           uint32 `json:"polynomial"`
	Elements       int    `json:"elements"`
	ElementMirrors int    `json:"element_mirrors"`
	DarkColumns    []int  `json:"dark_columns"`
	// DarkCorrelation is the largest correlation between the responses of two
	// steps in the dark columns.
	DarkCorrelation float64 `json:"dark_correlation"`
	Order           string  `json:"order"`
	Cycles          int     `json:"cycles"`
}

// RefStar is the reference star of a plan.
type RefStar struct {
	Name string `json:"name"`
	// Airmass is as Summary.Airmass, in the star's frames.
	Airmass [3]float64 `json:"airmass"`
}

// KindTotal is the steps of one kind.
type KindTotal struct {
	Kind  sequence.Kind `json:"kind"`
	Steps int           `json:"steps"`
	// Minutes includes the time to read the detector.
	Minutes float64 `json:"minutes"`
}

func summarize(s *sequence.Sequence, code *hadamard.Code, dark hadamard.DarkSet, o *optics) *Summary {
	t := s.Target
	r := &Summary{
		Target: t.Name, Profile: s.Profile.Name,
		Code: Code{
			Family: s.Family, V: s.V, K: s.K, L: s.L, Poly: s.Poly,
			Elements: s.N(), ElementMirrors: t.Code.ElementMirrors,
			DarkColumns: append([]int{}, dark.Columns...), DarkCorrelation: dark.Correlation,
			Order: t.Code.Order, Cycles: t.Code.Cycles,
		},
		Steps:    len(s.Steps),
		Warnings: warnings(s, o),
	}
	c1, c2 := s.Profile.VoxelDeg(t.Code.ElementMirrors)
	q0, q1 := o.rowsSeen()
	r.FieldArcsec = [2]float64{float64(s.N()) * c1 * 3600, (q1 - q0 + 1) * c2 * 3600}
	if code.Family() != hadamard.SlitScan {
		d := code.Design()
		r.ReadNoiseGain, r.PhotonThreshold = d.ReadNoiseGainDark(s.N()), d.PhotonThreshold(s.N())
		if math.IsInf(r.PhotonThreshold, 1) {
			r.PhotonThreshold = 0
		}
		r.judgeDark(dark.Correlation)
	}
	r.countTime(s)
	r.Airmass = airmass(s)
	if r.Airmass[0] == 0 || r.Airmass[1] == 0 || r.Airmass[2] == 0 {
		r.warn("the field is below the horizon during science exposures; choose another start_utc")
	} else if r.Airmass[2] > maxAirmass {
		r.warn("the field's airmass reaches %.2f during science exposures", r.Airmass[2])
	}
	r.addRefStar(s)
	r.Device = deviceOf(s)
	r.Gigabytes = float64(len(s.Steps)) * frameBytes(o) / 1e9
	return r
}

// judgeDark says where some steps leave the same mark on dark columns that are enough
// otherwise: steps of a sparse code that open none of them.
func (r *Summary) judgeDark(correlation float64) {
	const same = 1 - 1e-9
	if g := len(r.Code.DarkColumns); correlation > same && float64(g) >= 2*math.Log2(float64(r.Code.V)) {
		r.warn("the %d dark columns leave the same mark for some steps, whose frames can be neither told apart nor restored when lost: a step opens %.1f of them in the mean; give code.dark %d or more",
			g, float64(g*r.Code.K)/float64(r.Code.V), (5*r.Code.V+r.Code.K-1)/r.Code.K)
	}
}

// addRefStar says what becomes of the reference star.
func (r *Summary) addRefStar(s *sequence.Sequence) {
	star := s.Target.Calibration.RefStar
	if star == nil {
		return
	}
	r.RefStar = &RefStar{Name: star.Name, Airmass: airmassOf(s, sequence.RefStar, star.RADeg, star.DecDeg)}
	if x := r.RefStar.Airmass; x[0] == 0 || x[1] == 0 || x[2] == 0 {
		r.warn("the reference star %s is below the horizon; choose another", star.Name)
	}
}

func (r *Summary) warn(format string, args ...any) {
	r.Warnings = append(r.Warnings, fmt.Sprintf(format, args...))
}

func (r *Summary) countTime(s *sequence.Sequence) {
	var all float64
	for _, kind := range sequence.Kinds() {
		steps := s.StepsOf(kind)
		if len(steps) == 0 {
			continue
		}
		seconds := float64(len(steps)) * s.Profile.OverheadS()
		for _, i := range steps {
			seconds += s.Steps[i].ExptimeSeconds
		}
		r.Kinds = append(r.Kinds, KindTotal{Kind: kind, Steps: len(steps), Minutes: seconds / 60})
		all += seconds
	}
	r.Minutes = all / 60
	if start, err := s.Target.Start(); err == nil { // a checked target has one
		r.StartUTC = start.Format(time.RFC3339)
		r.EndUTC = start.Add(time.Duration(all * float64(time.Second)).Round(time.Second)).Format(time.RFC3339)
	}
}

// frameBytes is the size of a raw frame on disk: 16 bits a pixel filled up to
// whole FITS blocks, and a header of one block.
func frameBytes(o *optics) float64 {
	const block = 2880
	d := o.profile.Detector
	pixels := float64(d.RawColumns()) * float64(d.RawRows())
	return block * (1 + math.Ceil(pixels*2/block))
}

// String is the summary as a text for people, lines ended.
func (r *Summary) String() string {
	var b strings.Builder
	c := r.Code
	fmt.Fprintf(&b, "target   %s with %s\n", r.Target, r.Profile)
	fmt.Fprintf(&b, "code     %s, v = %d, k = %d, l = %d, %s order, cycles %d\n", c.Family, c.V, c.K, c.L, c.Order, c.Cycles)
	fmt.Fprintf(&b, "field    %d elements of %d mirrors, %.1f x %.1f arcsec\n", c.Elements, c.ElementMirrors, r.FieldArcsec[0], r.FieldArcsec[1])
	if len(c.DarkColumns) > 0 {
		fmt.Fprintf(&b, "dark     %d columns, largest correlation %.3f\n", len(c.DarkColumns), c.DarkCorrelation)
	}
	if r.ReadNoiseGain > 0 {
		fmt.Fprintf(&b, "gain     over a slit scan in equal time: %.2f where read noise rules;\n", r.ReadNoiseGain)
		if r.PhotonThreshold > 0 {
			fmt.Fprintf(&b, "         where photon noise rules only elements above %.2f times the mean gain\n", r.PhotonThreshold)
		} else {
			fmt.Fprintf(&b, "         where photon noise rules no element gains\n")
		}
	}
	for _, p := range r.Picked {
		fmt.Fprintf(&b, "rows     %s\n", p)
	}
	fmt.Fprintf(&b, "\n%-8s %6s %9s\n", "kind", "steps", "minutes")
	for _, k := range r.Kinds {
		fmt.Fprintf(&b, "%-8s %6d %9.1f\n", k.Kind, k.Steps, k.Minutes)
	}
	fmt.Fprintf(&b, "%-8s %6d %9.1f\n\n", "all", r.Steps, r.Minutes)
	b.WriteString(r.forecastText())
	if r.Trade != nil {
		fmt.Fprintf(&b, "%s\n", r.Trade)
	}
	b.WriteString(r.shortNightText())
	fmt.Fprintf(&b, "time     %s to %s, reading included\n", r.StartUTC, r.EndUTC)
	if r.Airmass[2] > 0 {
		fmt.Fprintf(&b, "airmass  %.2f to %.2f, at most %.2f\n", r.Airmass[0], r.Airmass[1], r.Airmass[2])
	}
	if p := r.Pointing; p != nil {
		fmt.Fprintf(&b, "point    the telescope at RA %.6f, Dec %+.6f, position angle %.4f (degrees):\n", p.RADeg, p.DecDeg, p.RotangDeg)
		fmt.Fprintf(&b, "         the field lies %.2f arcsec from there, as %d stars say\n", p.AwayArcsec, p.Stars)
	}
	if r.RefStar != nil && r.RefStar.Airmass[2] > 0 {
		fmt.Fprintf(&b, "refstar  %s, airmass %.2f to %.2f\n", r.RefStar.Name, r.RefStar.Airmass[0], r.RefStar.Airmass[1])
	}
	fmt.Fprintf(&b, "frames   %.2f GB", r.Gigabytes)
	if r.Masks > 0 {
		fmt.Fprintf(&b, ", %d distinct masks", r.Masks)
	}
	b.WriteString("\n")
	if r.Device != nil {
		b.WriteString(r.Device.String())
	}
	for _, w := range r.Warnings {
		fmt.Fprintf(&b, "warning  %s\n", w)
	}
	return b.String()
}

func number(x float64) string { return strconv.FormatFloat(x, 'g', 3, 64) }
