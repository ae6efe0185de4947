package sequence

import (
	"crypto/sha256"
	"encoding/hex"
	"time"

	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/scene"
)

// Target is what the observer asks for: section by section the keys of a
// target file. LoadTarget reads one; plan fills in what it leaves open, so that
// a sequence's target.yaml is complete.
type Target struct {
	Name string `yaml:"name"`
	// RADeg and DecDeg are the ICRS position of the field's centre, RotangDeg
	// the position angle of the cube's second axis, north through east.
	RADeg     float64 `yaml:"ra_deg"`
	DecDeg    float64 `yaml:"dec_deg"`
	RotangDeg float64 `yaml:"rotang_deg" config:"optional"`
	// StartUTC is the start of the first exposure, such as
	// 2031-03-14T02:30:00Z; Start gives it as a time.
	StartUTC string     `yaml:"start_utc"`
	Code     CodeChoice `yaml:"code"`
	// Field is where on the device the field lies; nil for its middle and all rows.
	Field *FieldChoice `yaml:"field" config:"optional"`
	// DwellSeconds is the exposure time of a science step and of the all-off
	// frames between them. It may be left out (0) where Code.Family is FamilyAuto.
	DwellSeconds float64 `yaml:"dwell_s" config:"optional"`
	// AllOffEvery asks for an all-off frame before the first science step,
	// after every so many of them, and after the last; 0 for none.
	AllOffEvery  int           `yaml:"all_off_every" config:"optional"`
	SentinelRows []SentinelRow `yaml:"sentinel_rows" config:"optional"`
	Closed       []ClosedRow   `yaml:"closed" config:"optional"`
	// FromSources asks plan for more of both, by the sources of the forecast; nil in a
	// sequence, where they are listed.
	FromSources *SourceRows `yaml:"from_sources" config:"optional"`
	Calibration Calibration `yaml:"calibration" config:"optional"`
	// Forecast is what is expected of the field; nil where nothing is said of it.
	Forecast *Forecast `yaml:"forecast" config:"optional"`

	// sky holds the spectra that the forecast names, once they are read.
	sky *scene.Scene
}

// FieldChoice says which part of the device is used.
type FieldChoice struct {
	// OffsetU is how many u the middle of the strips lies beyond the device's, towards larger
	// u; the position of the target moves with it, and so does the light on the detector.
	OffsetU int `yaml:"offset_u" config:"optional"`
	// Rows are the first and the last mirror row (w) to be used, empty for all. Plan closes
	// the others, but for sentinel rows among them.
	Rows []int `yaml:"rows,flow" config:"optional"`
}

// OffsetU is Field's, 0 where none is given.
func (t *Target) OffsetU() int {
	if t.Field == nil {
		return 0
	}
	return t.Field.OffsetU
}

// CodeChoice says how the field is coded.
type CodeChoice struct {
	// Family is one of the families: m-sequence, singer-complement, slit-scan ..., or
	// FamilyAuto: then plan chooses it, and of V, Dark, ElementMirrors and Cycles, and of
	// the dwell, what is left out.
	Family string `yaml:"family"`
	// V is the code's size; nil leaves it to plan: the smallest code that holds
	// as many elements as device and detector allow.
	V *int `yaml:"v" config:"optional"`
	// Dark is the number of dark columns; nil for the default rule.
	Dark *int `yaml:"dark" config:"optional"`
	// ElementMirrors is the width of an element in u, 0 where plan is to choose it.
	ElementMirrors int `yaml:"element_mirrors" config:"optional"`
	// Order is one of the orders below, OrderShuffled by default.
	Order string `yaml:"order" config:"optional"`
	// Seed chooses the dark columns and the order of the science steps.
	Seed int64 `yaml:"seed" config:"optional"`
	// Cycles is the number of complete sets of coded steps, 1 by default; 0 where plan is to
	// choose it.
	Cycles int `yaml:"cycles" config:"optional"`
}

// SetDefaults sets what absent keys mean.
func (c *CodeChoice) SetDefaults() {
	c.Order, c.Cycles = OrderShuffled, 1
}

// FamilyAuto asks plan for the code that serves the forecast's aim best.
const FamilyAuto = "auto"

// Auto tells whether plan is to choose the code.
func (c *CodeChoice) Auto() bool { return c.Family == FamilyAuto }

// The orders of the science steps within a cycle.
const (
	OrderNatural  = "natural"
	OrderShuffled = "shuffled"
	// OrderNested puts last the steps that a night cut short misses least.
	OrderNested = "nested"
	// OrderDrift is the order in which a throughput that drifts evenly marks dark columns
	// rather than elements.
	OrderDrift = "drift"
)

// Orders lists the orders.
func Orders() []string { return []string{OrderNatural, OrderShuffled, OrderNested, OrderDrift} }

// SentinelRow keeps the mirror rows First..Last (w, inclusive) on Element
// alone through all science steps.
type SentinelRow struct {
	First   int `yaml:"first"`
	Last    int `yaml:"last"`
	Element int `yaml:"element"`
}

// ClosedRow keeps the mirror rows First..Last (w, inclusive) off in every step,
// for one element or, with Element nil, for all.
type ClosedRow struct {
	First   int  `yaml:"first"`
	Last    int  `yaml:"last"`
	Element *int `yaml:"element" config:"optional"`
}

// SourceRows is what plan is to choose by the sources of the forecast.
type SourceRows struct {
	// Sentinels is how many ranges of sentinel rows may be planned, each on a star that no
	// measurement is about, if one measures the transmission better than dark columns do.
	Sentinels int `yaml:"sentinels" config:"optional"`
	// Patches is on how many such stars mirrors may be closed, where one would saturate or
	// its photon noise rule the other elements of its rows.
	Patches int `yaml:"patches" config:"optional"`
}

// Calibration lists the frames that are not of the target. A section left out
// asks for no frame.
type Calibration struct {
	Bias BiasFrames `yaml:"bias" config:"optional"`
	Dark DarkFrames `yaml:"dark" config:"optional"`
	Flat FlatFrames `yaml:"flat" config:"optional"`
	Arc  ArcFrames  `yaml:"arc" config:"optional"`
	// RefStar asks for frames of a star of known flux; nil for none.
	RefStar *RefStarFrames `yaml:"refstar" config:"optional"`
}

// BiasFrames asks for Count frames of no exposure time.
type BiasFrames struct {
	Count int `yaml:"count"`
}

// DarkFrames asks for Count frames with the shutter closed.
type DarkFrames struct {
	Count        int     `yaml:"count"`
	DwellSeconds float64 `yaml:"dwell_s" config:"optional"`
}

// FlatFrames asks for frames of a continuum lamp.
type FlatFrames struct {
	// Count is how often each of four lamp masks is taken: all elements on, the
	// even ones, the odd ones, none.
	Count        int     `yaml:"count"`
	DwellSeconds float64 `yaml:"dwell_s" config:"optional"`
	// Lamp is a name of at most eight characters.
	Lamp string `yaml:"lamp" config:"optional"`
	// CodedCycles is the number of complete cycles of code rows on the lamp.
	CodedCycles int `yaml:"coded_cycles" config:"optional"`
}

// ArcFrames asks for frames of a line lamp through single elements.
type ArcFrames struct {
	// Count is how often each chosen element is taken.
	Count        int     `yaml:"count"`
	DwellSeconds float64 `yaml:"dwell_s" config:"optional"`
	// Lamp is a name of at most eight characters.
	Lamp string `yaml:"lamp" config:"optional"`
	// Every chooses the elements 0, Every, 2 Every ... and the last one.
	Every int `yaml:"every" config:"optional"`
}

// RefStarFrames asks for frames of a reference star, whose flux is known, through
// neighbouring elements that are all open: one wide element, that no light of the star
// may miss. The telescope points so that the star stands in its middle, between the
// device's rows; rows away from the star show the sky of the same frame.
type RefStarFrames struct {
	// Name is the star's.
	Name         string  `yaml:"name"`
	Count        int     `yaml:"count"`
	DwellSeconds float64 `yaml:"dwell_s"`
	// RADeg and DecDeg are its ICRS position.
	RADeg  float64 `yaml:"ra_deg"`
	DecDeg float64 `yaml:"dec_deg"`
	// Elements are the first and the last element that are open.
	Elements [2]int `yaml:"elements,flow"`
}

// SetDefaults sets what absent keys mean.
func (a *ArcFrames) SetDefaults() { a.Every = 1 }

// YAML is the target as text, which depends on its values alone. The error
// names a value that no text can hold.
func (t *Target) YAML() ([]byte, error) { return config.Encode(t) }

// SHA is the lower-case hex SHA-256 of the target's YAML.
func (t *Target) SHA() (string, error) {
	text, err := t.YAML()
	if err != nil {
		return "", err
	}
	return digest(text), nil
}

// Start is StartUTC as a time.
func (t *Target) Start() (time.Time, error) { return parseUTC(t.StartUTC) }

func digest(data []byte) string {
	sum := sha256.Sum256(data)
	return hex.EncodeToString(sum[:])
}
