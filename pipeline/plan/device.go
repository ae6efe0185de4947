package plan

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Device is what the optics of the mirror array do to a plan (package physics has the
// formulas and what they leave out).
type Device struct {
	// HalfAngleDeg is that of the beam that comes to the device.
	HalfAngleDeg float64 `json:"half_angle_deg"`
	// AcrossUM is the distance of neighbouring lines of mirrors along the dispersion, and
	// TiltPeriodUM along the direction of the tilt: the mirrors' pitch, or that over the
	// square root of 2.
	AcrossUM     float64 `json:"line_distance_um"`
	TiltPeriodUM float64 `json:"tilt_period_um"`
	ElementUM    float64 `json:"element_um"`
	// At are figures at the ends and the middle of the band, at the orders' peaks in it and
	// midway between, ascending in wavelength.
	At []DeviceAt `json:"at"`
	// Peaks are the orders of the array as a grating that have their peak in the band,
	// PeakCount how many those are in all: at most 8 are listed.
	Peaks     []OrderPeak `json:"order_peaks"`
	PeakCount int         `json:"order_peak_count"`
	// Warnings are about the device; other ones are in Summary.
	Warnings []string `json:"warnings"`
}

// DeviceAt is the device at a wavelength.
type DeviceAt struct {
	WavelengthNM float64 `json:"wavelength_nm"`
	// SpotUM is the diameter of the first dark ring of a star's image in a perfect telescope
	// without obstruction, um; SpotInElement its share within an element's width.
	SpotUM        float64 `json:"spot_um"`
	SpotInElement float64 `json:"spot_in_element"`
	// BlazeOrder is the order on the blaze, a whole one at a peak; Taken the share of the
	// light of a device with all mirrors on that the spectrograph's pupil takes.
	BlazeOrder float64 `json:"blaze_order"`
	Taken      float64 `json:"taken"`
	// Neighbour is what two open neighbours give beyond each alone, over the light of one:
	// below 0 where they take light from each other.
	Neighbour float64 `json:"neighbour"`
	Contrast  float64 `json:"contrast"`
	// Pedestal is the share of the whole field's light that the leak of closed mirrors adds
	// to each decoded element, before all-off frames are subtracted.
	Pedestal float64 `json:"leak_pedestal"`
}

// OrderPeak is an order of the array as a grating.
type OrderPeak struct {
	Order        int     `json:"order"`
	WavelengthNM float64 `json:"wavelength_nm"`
	// Ripple is how much less of the light the pupil takes midway to the next higher order,
	// as a share of what it takes at the peak; 0 where so many orders lie in the beam that
	// none stands out.
	Ripple float64 `json:"ripple"`
}

const (
	mostPeaks = 8
	// Above this share of an element's light the neighbour term is worth a warning.
	neighbourLimit = 0.002
	// Smaller ripples of the device's efficiency are as good as none: they are no more than
	// what a lamp's own colour leaves to be fitted.
	rippleLimit = 0.01
	// What programmable slit masks are commonly asked for (common practice, no source).
	contrastLimit = 2000
)

// deviceOf works the figures out over the grid's band.
func deviceOf(s *sequence.Sequence) *Device {
	p := s.Profile
	o := deviceOptics{p, p.StripArray(s.ElementMirrors()), p.Beam()}
	first, last := p.Grid.WavelengthNM(-0.5), p.Grid.WavelengthNM(float64(p.Grid.Count)-0.5)
	d := &Device{
		HalfAngleDeg: physics.BeamHalfAngle(o.beam.FNumber),
		AcrossUM:     o.array.StepUM(), TiltPeriodUM: o.array.PeriodUM(), ElementUM: o.array.WidthUM(),
		Peaks: []OrderPeak{}, Warnings: []string{},
	}
	orders := o.array.Orders(first, last)
	d.PeakCount = len(orders)
	for _, m := range orders[:min(len(orders), mostPeaks)] {
		d.Peaks = append(d.Peaks, o.peak(m))
	}
	wavelengths := []float64{first, (first + last) / 2, last}
	for _, p := range d.Peaks {
		wavelengths = append(wavelengths, p.WavelengthNM)
		if between := o.between(p.Order); between > first {
			wavelengths = append(wavelengths, between)
		}
	}
	slices.Sort(wavelengths)
	for _, nm := range slices.Compact(wavelengths) {
		d.At = append(d.At, o.at(nm, s.K))
	}
	d.warn(o, s)
	return d
}

// deviceOptics is the device in its beam.
type deviceOptics struct {
	profile *instrument.Profile
	array   physics.StripArray
	beam    physics.Beam
}

func (o deviceOptics) at(nm float64, opened int) DeviceAt {
	contrast := o.profile.DMD.Contrast.At(nm)
	return DeviceAt{
		WavelengthNM:  nm,
		SpotUM:        2 * physics.AiryRadius(nm, o.beam.FNumber),
		SpotInElement: physics.AiryStrip(o.array.WidthUM(), nm, o.beam.FNumber),
		BlazeOrder:    o.array.BlazeOrder(nm),
		Taken:         o.taken(nm),
		Neighbour:     o.neighbour(nm),
		Contrast:      contrast,
		Pedestal:      physics.LeakPedestal(contrast, opened),
	}
}

// taken is all light where more orders lie in the beam than can be followed.
func (o deviceOptics) taken(nm float64) float64 {
	if taken := o.array.Taken(nm, o.beam); !math.IsNaN(taken) {
		return taken
	}
	return 1
}

// neighbour is 0 where mirrors are so small that no light arrives.
func (o deviceOptics) neighbour(nm float64) float64 {
	if d := o.array.Neighbour(nm, o.beam); !math.IsNaN(d) {
		return d
	}
	return 0
}

func (o deviceOptics) peak(m int) OrderPeak {
	nm := o.array.OrderPeak(m)
	top := o.taken(nm)
	return OrderPeak{Order: m, WavelengthNM: nm, Ripple: ripple(o.taken(o.between(m)), top)}
}

// ripple is 0 where no light arrives at all.
func ripple(between, top float64) float64 {
	if top == 0 {
		return 0
	}
	return max(0, 1-between/top)
}

// between is the wavelength midway, in orders, from an order's peak to that of the next
// higher one.
func (o deviceOptics) between(m int) float64 { return o.array.OrderPeak(1) / (float64(m) + 0.5) }

// warn says what an observer should know.
func (d *Device) warn(o deviceOptics, s *sequence.Sequence) {
	add := func(ok bool, format string, args ...any) {
		if !ok {
			d.Warnings = append(d.Warnings, fmt.Sprintf(format, args...))
		}
	}
	for _, p := range d.Peaks {
		add(p.Order != 1, "the first order of the mirror grating has its peak in the band, at %.1f nm: the device's efficiency falls off to both sides of it", p.WavelengthNM)
	}
	least, most := 1.0, 0.0
	for _, at := range d.At {
		least, most = min(least, at.Taken), max(most, at.Taken)
	}
	add(least > (1-rippleLimit)*most, "%s: on and between peaks the pupil takes %.0f to %.0f %% of the light at f/%s; lamp flats show that if their beam is as fast as the telescope's", d.peakWords(o), 100*least, 100*most, number(o.beam.FNumber))
	red, widest := d.At[0], d.At[0]
	neighbour, weakest := d.At[0], d.At[0]
	for _, at := range d.At {
		if at.SpotInElement < red.SpotInElement {
			red = at
		}
		if at.SpotUM > widest.SpotUM {
			widest = at
		}
		if math.Abs(at.Neighbour) > math.Abs(neighbour.Neighbour) {
			neighbour = at
		}
		if at.Contrast < weakest.Contrast {
			weakest = at
		}
	}
	add(d.ElementUM >= widest.SpotUM, "an element of %.1f um is narrower than the spot of a star at %.0f nm, %.1f um to the first dark ring: it holds at most %.0f %% of a star's light; give a larger code.element_mirrors", d.ElementUM, widest.WavelengthNM, widest.SpotUM, 100*red.SpotInElement)
	cure := "reduce measures the smooth part of it on the coded flats"
	if s.Target.Calibration.Flat.CodedCycles == 0 {
		cure = "plan a coded flat cycle (calibration.flat.coded_cycles), on which reduce measures the smooth part of it"
	}
	add(math.Abs(neighbour.Neighbour) <= neighbourLimit, "open neighbours change each other's light by %+.2f %% at %.0f nm, more than %.1f %%: %s", 100*neighbour.Neighbour, neighbour.WavelengthNM, 100*neighbourLimit, cure)
	cure = "the all-off frames of the plan show what leaks"
	if s.Target.AllOffEvery == 0 {
		cure = "plan all-off frames (all_off_every)"
	}
	add(weakest.Contrast >= contrastLimit, "the contrast is %.0f at %.0f nm, below the %d that slit masks are commonly asked for: %s", weakest.Contrast, weakest.WavelengthNM, contrastLimit, cure)
}

// peakWords names the peaks.
func (d *Device) peakWords(o deviceOptics) string {
	if len(d.Peaks) == 0 {
		m := o.array.NearestOrder(d.At[len(d.At)/2].WavelengthNM)
		return fmt.Sprintf("no order of the mirror grating has its peak in the band, the nearest is order %d at %.1f nm", m, o.array.OrderPeak(m))
	}
	var names []string
	for _, p := range d.Peaks {
		names = append(names, fmt.Sprintf("%d at %.1f nm", p.Order, p.WavelengthNM))
	}
	if more := d.PeakCount - len(d.Peaks); more > 0 {
		names = append(names, fmt.Sprintf("%d more", more))
	}
	return "the mirror grating has orders with their peak in the band, " + strings.Join(names, ", ")
}

// String is the section of the summary, lines ended.
func (d *Device) String() string {
	var b strings.Builder
	fmt.Fprintf(&b, "device   half-angle of the beam %.2f degrees; lines of mirrors %.2f um apart along the dispersion,\n", d.HalfAngleDeg, d.AcrossUM)
	fmt.Fprintf(&b, "         %.2f um along the tilt; an element is %.2f um wide\n\n", d.TiltPeriodUM, d.ElementUM)
	fmt.Fprintf(&b, "%9s %8s %10s %6s %6s %10s %9s %9s\n", "nm", "spot um", "in element", "order", "taken", "neighbour", "contrast", "pedestal")
	for _, a := range d.At {
		fmt.Fprintf(&b, "%9.1f %8.2f %8.1f %% %6.2f %4.0f %% %+8.2f %% %9.0f %9.1e\n", a.WavelengthNM, a.SpotUM, 100*a.SpotInElement, a.BlazeOrder, 100*a.Taken, 100*a.Neighbour, a.Contrast, a.Pedestal)
	}
	b.WriteString("\n")
	for _, w := range d.Warnings {
		fmt.Fprintf(&b, "warning  %s\n", w)
	}
	return b.String()
}
