package rehearse

import (
	"math"
	"math/rand/v2"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
)

// segment is a run of raw columns of one raw row that one amplifier reads.
type segment struct {
	amplifier int
	raw       int // first raw column, from 0
	columns   int
	active    int // first active column; -1 for overscan
}

// rawRow is a row of a raw frame.
type rawRow struct {
	active   int // row of active pixels; -1 where there is none
	segments []segment
}

// detector turns electrons into raw frames.
type detector struct {
	instrument.Detector
	seed               uint64
	noiseless, perfect bool
	rawColumns         int
	rows               []rawRow
	dead               []bool // active columns that see no light
	// noise is the read mode's. Its photons count as Photon of the square of their
	// deviation from the mean: of the right variance, though no sum of single reads.
	noise physics.EffectiveNoise
}

// Fixed properties of the sensor, all invented and mild.
const (
	columnsPerDead   = 640   // at most one dead column in so many
	responseRMS      = 0.01  // of the pixels' responses
	patternSmoothADU = 2     // amplitude of the bias' slow pattern
	patternColumnADU = 0.8   // rms of its columns
	patternPixelADU  = 0.4   // rms of its pixels
	driftADU         = 1.2   // amplitude of an amplifier's drift along a frame
	driftLongRows    = 250.0 // its shortest period, rows
	unknownCurve     = 0.004 // loss at saturation that the profile's linearity leaves
	// overflow is where a pixel stops to collect, against the level that the
	// profile calls saturated: above it, so that a full pixel reads as such.
	overflow = 1.02
)

func newDetector(d instrument.Detector, seed uint64, perfect, noiseless bool) *detector {
	t := &detector{Detector: d, seed: seed, perfect: perfect, noiseless: noiseless, rawColumns: d.RawColumns()}
	mode := d.Mode()
	var err error
	if t.noise, err = (physics.ReadMode{Kind: physics.ReadKind(mode.Kind), Reads: mode.Reads, Spacing: mode.Spacing}).Noise(); err != nil {
		panic("internal error: a checked profile's read mode: " + err.Error())
	}
	t.rows = make([]rawRow, d.RawRows())
	for r := range t.rows {
		t.rows[r].active = -1
	}
	for a, place := range d.Active() {
		x0, x1, y0, y1 := place.Raw.Bounds0()
		for r := y0; r < y1; r++ {
			t.rows[r].active = place.Y0 + r - y0
			t.rows[r].segments = append(t.rows[r].segments, segment{a, x0, x1 - x0, place.X0})
		}
	}
	for a, amplifier := range d.Amplifiers {
		section, ok := amplifier.Overscan.Section()
		if !ok {
			continue
		}
		x0, x1, y0, y1 := section.Bounds0()
		for r := y0; r < y1; r++ {
			t.rows[r].segments = append(t.rows[r].segments, segment{a, x0, x1 - x0, -1})
		}
	}
	t.dead = make([]bool, d.Columns)
	pcg := newStream(seed, "dead columns", 0, 0)
	for range d.Columns / columnsPerDead {
		t.dead[int(uniform(pcg)*float64(d.Columns))] = true
	}
	return t
}

// response is the relative response of the pixels of an active row.
func (t *detector) response(y int) []float64 {
	list := make([]float64, t.Columns)
	r := rand.New(newStream(t.seed, "pixel response", 0, y))
	for x := range list {
		list[x] = 1
		if !t.perfect {
			list[x] = math.Max(1+responseRMS*r.NormFloat64(), 0.5)
		}
		if t.dead[x] {
			list[x] = 0
		}
	}
	return list
}

// pattern is the fixed pattern of the bias of an active row, ADU above the
// amplifier's level.
func (t *detector) pattern(y int) []float64 {
	list := make([]float64, t.Columns)
	columns := rand.New(newStream(t.seed, "bias columns", 0, 0))
	pixels := rand.New(newStream(t.seed, "bias pixels", 0, y))
	phase := 2 * math.Pi * uniform(newStream(t.seed, "bias waves", 0, 0))
	v := float64(y) / float64(t.Rows)
	for x := range list {
		u := float64(x) / float64(t.Columns)
		slow := patternSmoothADU * math.Sin(2*math.Pi*(1.5*u+0.8*v)+phase) * math.Cos(2*math.Pi*(0.7*v-0.4*u)+phase)
		list[x] = slow + patternColumnADU*columns.NormFloat64() + patternPixelADU*pixels.NormFloat64()
	}
	return list
}

// drift is how far an amplifier's level has moved in a raw row of a step, ADU:
// slow waves, new in each frame, data and overscan alike. An amplifier without
// overscan has none, since nothing would tell it.
func (t *detector) drift(step, amplifier, row int) float64 {
	if t.noiseless || len(t.Amplifiers[amplifier].Overscan) == 0 {
		return 0
	}
	pcg := newStream(t.seed, "bias drift", step, amplifier)
	level := within(pcg, driftADU)
	sum := level
	for k := range 2 {
		period := driftLongRows * float64(1+k) * (1 + uniform(pcg))
		phase := 2 * math.Pi * uniform(pcg)
		sum += driftADU / 2 * math.Sin(2*math.Pi*float64(row)/period+phase)
	}
	return sum
}

// reading is what reading a row needs besides the electrons expected.
type reading struct {
	step    int
	exptime float64
	offsetE float64
	hits    []hit // of the row
	pattern []float64
	persist float64
	// before is what the row collected in the step before, electrons; read
	// leaves in it what it collects now.
	before []float64
}

// reader makes the raw rows of a night; one serves one goroutine.
type reader struct {
	t      *detector
	pcg    rand.PCG
	normal *rand.Rand
	charge []float64
	// full counts the saturated pixels of the row read last.
	full int
}

func (t *detector) newReader() *reader {
	r := &reader{t: t, charge: make([]float64, t.Columns)}
	r.normal = rand.New(&r.pcg)
	return r
}

// read turns the electrons that light is expected to make in a row into raw
// values in ADU, not yet rounded; dst has the raw columns and is 0 where no
// amplifier reads. mean is used up.
func (r *reader) read(dst []float64, raw int, mean []float64, in *reading) {
	row := &r.t.rows[raw]
	clear(dst)
	r.full = 0
	if row.active >= 0 {
		r.collect(row, mean, in)
	}
	reseed(&r.pcg, r.t.seed, "read", in.step, raw)
	for _, s := range row.segments {
		a := r.t.Amplifiers[s.amplifier]
		level := a.BiasADU + r.t.drift(in.step, s.amplifier, raw) + in.offsetE/a.GainEPerADU
		for i := range s.columns {
			value := level
			if s.active >= 0 {
				x := s.active + i
				value += in.pattern[x] + r.charge[x]
			}
			if !r.t.noiseless {
				value += math.Sqrt(r.t.noise.Read) * a.ReadNoiseE / a.GainEPerADU * r.normal.NormFloat64()
			}
			dst[s.raw+i] = value
		}
	}
}

// collect fills charge with what the pixels of a row hold, in ADU above bias.
func (r *reader) collect(row *rawRow, mean []float64, in *reading) {
	t := r.t
	dark := t.DarkEPerS * in.exptime
	for x := range mean {
		mean[x] += dark + in.persist*in.before[x]
		if t.dead[x] {
			mean[x] = 0
		}
	}
	if !t.noiseless {
		reseed(&r.pcg, t.seed, "photons", in.step, row.active)
		for x, m := range mean {
			mean[x] = poisson(&r.pcg, m)
			if t.noise.Photon != 1 {
				mean[x] = m + math.Sqrt(t.noise.Photon)*(mean[x]-m)
			}
		}
	}
	for _, h := range in.hits {
		if !t.dead[h.x] {
			mean[h.x] += h.charge
		}
	}
	for _, s := range row.segments {
		if s.active < 0 {
			continue
		}
		a := t.Amplifiers[s.amplifier]
		full := overflow * (t.SaturationADU - a.BiasADU)
		for x := s.active; x < s.active+s.columns; x++ {
			linear := mean[x] / a.GainEPerADU
			if linear >= full/overflow {
				r.full++
			}
			if linear > full {
				linear = full
			}
			in.before[x] = linear * a.GainEPerADU
			r.charge[x] = t.measured(linear)
		}
	}
}

// measured is the reading m, ADU above bias, of a charge: the profile's
// correction m (1 + c1 m + c2 m^2 ...) of it gives the charge, but for a little
// that the profile does not know of unless the instrument is perfect. Solved by
// iteration, which gains the size of the correction a pass.
func (t *detector) measured(linear float64) float64 {
	if !t.perfect {
		linear *= 1 - unknownCurve*linear/t.SaturationADU
	}
	if len(t.Linearity) == 0 {
		return linear
	}
	m := linear
	for range 12 {
		sum := 0.0
		for i := len(t.Linearity) - 1; i >= 0; i-- {
			sum = (sum + t.Linearity[i]) * m
		}
		m = linear / (1 + sum)
	}
	return m
}
