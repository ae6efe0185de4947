package sequence

import (
	"fmt"
	"strings"
	"time"

	"mirrorloom/configs"
	"mirrorloom/pipeline/config"
)

// Limits of a target's numbers: far beyond any use, and small enough that no
// sum or product of them overflows.
const (
	maxDwellSeconds = 86400
	maxFrames       = 10000  // of one kind of calibration
	maxMirror       = 100000 // any mirror coordinate
	maxCycles       = 1000
	maxFromSources  = 100 // ranges of sentinel rows, or patches
	maxLampBytes    = 8   // the LAMP column
	maxNameBytes    = 68  // one header card
)

// LoadTarget reads and checks a target by the name of an embedded one or by
// path. Errors name file, line and key path, what is wrong and the cure.
func LoadTarget(pathOrName string) (*Target, error) {
	source, err := config.Find(configs.Targets, pathOrName)
	if err != nil {
		return nil, fmt.Errorf("target: %w", err)
	}
	return ParseTargetBeside(source.Name, source.Data, source.Beside)
}

// ParseTarget reads and checks the text of a target that names no CSV files; name is what
// errors call the file.
func ParseTarget(name string, data []byte) (*Target, error) {
	return ParseTargetBeside(name, data, nil)
}

// ParseTargetBeside is ParseTarget for a target that may name files, which beside reads.
func ParseTargetBeside(name string, data []byte, beside func(file string) ([]byte, error)) (*Target, error) {
	doc, err := config.Parse(name, data)
	if err != nil {
		return nil, err
	}
	t := new(Target)
	if err := doc.Decode(t); err != nil {
		return nil, err
	}
	if t.Code.Auto() && !doc.Has("code.cycles") {
		t.Code.Cycles = 0
	}
	if err := t.check(doc); err != nil {
		return nil, err
	}
	if err := t.readSpectra(doc, beside); err != nil {
		return nil, err
	}
	return t, nil
}

// Check tells what is wrong with a target that comes from no file.
func (t *Target) Check() error { return t.check(nil) }

func (t *Target) check(doc *config.Doc) error {
	c := doc.Checks()
	c.That(printable(t.Name, maxNameBytes), "name", "%q is no name; write 1 to %d printable ASCII characters", t.Name, maxNameBytes)
	c.That(t.RADeg >= 0 && t.RADeg < 360, "ra_deg", "%v is outside 0 to below 360; give degrees", t.RADeg)
	c.Within("dec_deg", t.DecDeg, -90, 90)
	c.Within("rotang_deg", t.RotangDeg, -360, 360)
	_, err := parseUTC(t.StartUTC)
	c.That(err == nil, "start_utc", "%q is no time; write it like 2031-03-14T02:30:00Z", t.StartUTC)
	if t.Code.Auto() {
		t.checkAuto(c)
	} else {
		t.checkCode(c, doc)
	}
	if !t.Code.Auto() || t.DwellSeconds != 0 {
		c.That(doc == nil || doc.Has("dwell_s"), "dwell_s", "the key is missing; add it")
		c.Positive("dwell_s", t.DwellSeconds)
		c.Within("dwell_s", t.DwellSeconds, 0, maxDwellSeconds)
	}
	c.Count("all_off_every", t.AllOffEvery, 0, maxFrames)
	t.checkField(c)
	t.checkRows(c)
	t.checkCalibration(c)
	t.checkForecast(c)
	return c.Err()
}

func (t *Target) checkCode(c *config.Checks, doc *config.Doc) {
	family := t.Code.Family
	if !c.That(isFamily(family), "code.family", "%q is no code family; write one of %s, %s", family, FamilyAuto, familyList()) {
		return
	}
	dark := 0
	if t.Code.Dark != nil {
		dark = *t.Code.Dark
		c.Count("code.dark", dark, 0, maxV-1)
		c.That(family != slitScan || dark == 0, "code.dark", "a slit scan has no dark columns, not %d; write 0", dark)
	}
	if t.Code.V != nil {
		c.That(hasSize(family, *t.Code.V), "code.v", "%s", sizeAdvice(family, *t.Code.V))
		c.That(dark < *t.Code.V, "code.dark", "%d dark columns leave no element of the %d columns; give fewer", dark, *t.Code.V)
	}
	c.That(doc == nil || doc.Has("code.element_mirrors"), "code.element_mirrors", "the key is missing; add it")
	c.Count("code.element_mirrors", t.Code.ElementMirrors, 1, maxMirror)
	c.Count("code.cycles", t.Code.Cycles, 1, maxCycles)
	t.checkOrder(c)
}

// checkAuto looks at the code of a target that leaves it to plan.
func (t *Target) checkAuto(c *config.Checks) {
	if t.Code.Dark != nil {
		c.Count("code.dark", *t.Code.Dark, 0, maxV-1)
	}
	if t.Code.V != nil {
		c.Count("code.v", *t.Code.V, 1, maxV)
		c.That(t.Code.Dark == nil || *t.Code.Dark < *t.Code.V, "code.dark", "no element is left of the %d columns; give fewer", *t.Code.V)
	}
	c.Count("code.element_mirrors", t.Code.ElementMirrors, 0, maxMirror)
	c.Count("code.cycles", t.Code.Cycles, 0, maxCycles)
	t.checkOrder(c)
	switch f := t.Forecast; {
	case f == nil:
		c.That(false, "code.family", "auto chooses by what is expected, and the target has no forecast; add one, or write a family")
	case len(f.Wanted) == 0:
		c.That(false, "forecast.wanted", "code.family auto chooses by the S/N of what is wanted, and nothing is; list measurements, or write a family")
	default:
		c.That(f.Limits.TotalSeconds > 0, "forecast.limits.total_s", "code.family auto compares codes in equal time, and there is no limit; give the seconds of all exposures")
	}
}

func (t *Target) checkOrder(c *config.Checks) {
	c.OneOf("code.order", t.Code.Order, Orders()...)
	c.That(t.Code.Seed >= 0, "code.seed", "%d is below 0; give a whole number from 0", t.Code.Seed)
}

func (t *Target) checkField(c *config.Checks) {
	f := t.Field
	if f == nil {
		return
	}
	c.Count("field.offset_u", f.OffsetU, -maxMirror, maxMirror)
	if len(f.Rows) == 0 {
		return
	}
	if c.That(len(f.Rows) == 2, "field.rows", "%d numbers are no range of rows; write [first, last]", len(f.Rows)) {
		c.Count("field.rows[0]", f.Rows[0], -maxMirror, maxMirror)
		c.Count("field.rows[1]", f.Rows[1], -maxMirror, maxMirror)
		c.That(f.Rows[0] <= f.Rows[1], "field.rows", "%d lies before %d; exchange them", f.Rows[1], f.Rows[0])
	}
}

func (t *Target) checkRows(c *config.Checks) {
	for i, r := range t.SentinelRows {
		path := fmt.Sprintf("sentinel_rows[%d]", i)
		checkRange(c, path, r.First, r.Last)
		c.Count(path+".element", r.Element, 0, maxV-1)
	}
	if s := t.FromSources; s != nil {
		c.Count("from_sources.sentinels", s.Sentinels, 0, maxFromSources)
		c.Count("from_sources.patches", s.Patches, 0, maxFromSources)
		c.That(t.Forecast != nil, "from_sources", "rows are chosen by the sources of the forecast, and the target has none; add forecast.sources, or list the rows")
	}
	for i, r := range t.Closed {
		path := fmt.Sprintf("closed[%d]", i)
		checkRange(c, path, r.First, r.Last)
		if r.Element != nil {
			c.Count(path+".element", *r.Element, 0, maxV-1)
		}
	}
}

func checkRange(c *config.Checks, path string, first, last int) {
	c.Count(path+".first", first, -maxMirror, maxMirror)
	c.Count(path+".last", last, -maxMirror, maxMirror)
	c.That(first <= last, path+".last", "%d lies before first %d; exchange them", last, first)
}

func (t *Target) checkCalibration(c *config.Checks) {
	k := t.Calibration
	c.Count("calibration.bias.count", k.Bias.Count, 0, maxFrames)
	checkLit(c, "calibration.dark", k.Dark.Count, k.Dark.DwellSeconds)
	checkLit(c, "calibration.flat", k.Flat.Count, k.Flat.DwellSeconds)
	c.Count("calibration.flat.coded_cycles", k.Flat.CodedCycles, 0, maxCycles)
	if k.Flat.Count > 0 || k.Flat.CodedCycles > 0 {
		c.Positive("calibration.flat.dwell_s", k.Flat.DwellSeconds)
		checkLamp(c, "calibration.flat.lamp", k.Flat.Lamp)
	}
	checkLit(c, "calibration.arc", k.Arc.Count, k.Arc.DwellSeconds)
	c.Count("calibration.arc.every", k.Arc.Every, 1, maxFrames)
	if k.Arc.Count > 0 {
		checkLamp(c, "calibration.arc.lamp", k.Arc.Lamp)
	}
	if k.RefStar != nil {
		k.RefStar.check(c, "calibration.refstar")
	}
}

func (r *RefStarFrames) check(c *config.Checks, path string) {
	c.That(printable(r.Name, maxNameBytes), path+".name", "%q is no name; write 1 to %d printable ASCII characters", r.Name, maxNameBytes)
	c.Count(path+".count", r.Count, 1, maxFrames)
	c.Positive(path+".dwell_s", r.DwellSeconds)
	c.Within(path+".dwell_s", r.DwellSeconds, 0, maxDwellSeconds)
	c.That(r.RADeg >= 0 && r.RADeg < 360, path+".ra_deg", "%v is outside 0 to below 360; give degrees", r.RADeg)
	c.Within(path+".dec_deg", r.DecDeg, -90, 90)
	for i, j := range r.Elements {
		c.Count(fmt.Sprintf("%s.elements[%d]", path, i), j, 0, maxV-1)
	}
	c.That(r.Elements[0] <= r.Elements[1], path+".elements", "%d lies before %d; exchange them", r.Elements[1], r.Elements[0])
}

func checkLit(c *config.Checks, path string, count int, dwell float64) {
	c.Count(path+".count", count, 0, maxFrames)
	c.Within(path+".dwell_s", dwell, 0, maxDwellSeconds)
	if count > 0 {
		c.Positive(path+".dwell_s", dwell)
	}
}

func checkLamp(c *config.Checks, path, lamp string) {
	c.That(printable(lamp, maxLampBytes), path, "%q is no lamp; write a name of 1 to %d printable ASCII characters", lamp, maxLampBytes)
}

// printable tells whether text fits a header card or table field as it is: no
// character is lost, neither at its ends nor by its length.
func printable(text string, most int) bool {
	if text == "" || len(text) > most || strings.TrimSpace(text) != text {
		return false
	}
	for i := range len(text) {
		if text[i] < ' ' || text[i] > '~' {
			return false
		}
	}
	return true
}

// parseUTC reads an ISO 8601 time of day in UTC, with a closing Z or, as FITS
// headers have it (Standard 4.0, section 9.1.1), without.
func parseUTC(text string) (time.Time, error) {
	const layout = "2006-01-02T15:04:05"
	at, err := time.Parse(layout, strings.TrimSuffix(text, "Z"))
	if err != nil {
		return time.Time{}, fmt.Errorf("%q is no time like 2031-03-14T02:30:00Z: %w", text, err)
	}
	return at, nil
}
