package main

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"time"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

func audits(v, dark int, sn float64) check {
	const nights = 50
	return check{
		name: fmt.Sprintf("audit of the pairing, v = %d", v),
		about: fmt.Sprintf(`Small nights of raw signal to noise %g in the median sample, with a throughput that scatters
by 5 %% and falls by 30 %%; half of them with cosmic rays in 0.5 of 1000 samples; half of them
with a fault drawn from: two or four frames exchanged, one or two stale, flipped or inverted
masks, the first with a lost frame besides; all masks a step or a third of the steps off, in
reverse, every second one and then the others, or one passed over. Found is what the ledger
does not call ok; a fault that changes decoded voxels by less than 0.05 of their error (rms,
of noiseless frames) may be missed. A false alarm is a frame that is right and is not called
so. Exchanged frames have to be used for the steps that they show, those of other faults for
none.`, sn),
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			return auditCase{v, dark, sn, nights}.run(ctx, dir)
		},
	}
}

// auditCase is nights of a code at a raw signal to noise.
type auditCase struct {
	v, dark int
	sn      float64
	nights  int // with a fault, and as many without
}

// field is the small square field whose light gives the median of the readings the raw
// signal to noise asked for.
func (c auditCase) field(ctx context.Context, dir string) (*trial.Night, error) {
	dim := 0.0
	for try := range 4 {
		f, err := trial.Square()
		if err != nil {
			return nil, err
		}
		c.shape(f)
		f.Dim(dim)
		sub := filepath.Join(dir, fmt.Sprintf("field-%d", try))
		if err := os.MkdirAll(sub, 0o755); err != nil {
			return nil, err
		}
		n, err := f.Plan(ctx, sub)
		if err != nil {
			return nil, err
		}
		for _, fault := range []string{"", rehearse.Flip, rehearse.Invert} {
			opts := rehearse.Options{Noiseless: true, NoTruth: true}
			if fault != "" {
				opts.Faults = []rehearse.Fault{{Name: fault}}
			}
			if err := n.Rehearse(ctx, "clean"+fault, opts); err != nil {
				return nil, err
			}
		}
		light, err := clean(n, "clean")
		if err != nil {
			return nil, err
		}
		// y = sn sqrt(y + read^2) in the median sample.
		read := f.Profile.Detector.Amplifiers[0].ReadNoiseE
		want := c.sn * (c.sn/2 + math.Sqrt(c.sn*c.sn/4+read*read))
		got := light.median()
		if math.Abs(got/want-1) < 0.1 {
			return n, nil
		}
		dim += 2.5 * math.Log10(got/want)
	}
	return nil, fmt.Errorf("no field of raw signal to noise %g was found", c.sn)
}

// shape gives the field the code, as many elements of one or two mirrors as its device
// has room for, and rows enough that wrong frames of a faint sky can be told.
func (c auditCase) shape(f *trial.Field) {
	p := f.Profile
	f.SetCode("m-sequence", c.v, c.dark)
	rows := 144
	if c.v > 100 {
		f.Target.Code.ElementMirrors = 1
		p.DMD.Columns = c.v
		rows = 48
	}
	p.DMD.Rows = rows - 8
	p.Spectrograph.YCenterPx = float64(rows)/2 - 0.8
	trial.TwoAmplifiers(&p.Detector, p.Detector.Columns, rows)
	f.Turn(p.DMD.Parity, f.Target.RotangDeg) // the scenery for this shape
}

func (c auditCase) run(ctx context.Context, dir string) ([]trial.Finding, error) {
	n, err := c.field(ctx, dir)
	if err != nil {
		return nil, err
	}
	light, err := clean(n, "clean")
	if err != nil {
		return nil, err
	}
	flipped, err := clean(n, "clean"+rehearse.Flip)
	if err != nil {
		return nil, err
	}
	inverted, err := clean(n, "clean"+rehearse.Invert)
	if err != nil {
		return nil, err
	}
	kinds := auditKinds()
	drift := []rehearse.Fault{{Name: rehearse.Drift, Size: 0.05}, {Name: rehearse.Trend, Size: -0.3}}
	var wrong, missed, mistaken, faint, alarms int
	for night := range 2 * c.nights {
		faults, order := drift, func(t, _ int) int { return t }
		if night%2 == 0 {
			kind := kinds[night/2%len(kinds)]
			faults = append(slices.Clone(drift), kind.faults...)
			if kind.order != nil {
				order = kind.order
			}
		}
		// Every other kind with hits, and the other way round at the next time.
		if (night/2+night/2/len(kinds))%2 == 1 {
			faults = append(slices.Clone(faults), rehearse.Fault{Name: rehearse.Cosmic, Size: 0.5})
		}
		name := fmt.Sprint(night)
		start := time.Now()
		if err := n.RehearseOrder(ctx, name, order, rehearse.Options{Seed: uint64(1000*c.v + night), NoTruth: true, Faults: faults}); err != nil {
			return nil, err
		}
		rehearsed := time.Now()
		a, err := n.Audit(ctx, name, pair.Options{})
		if err != nil {
			return nil, err
		}
		audited := time.Now()
		truth, err := n.Faults(name)
		if err != nil {
			return nil, err
		}
		fmt.Fprintf(os.Stderr, "night %d of %d, v = %d: %d frames wrong, %d missed, %d mistaken, %d false; rehearsed in %.1f s, audited in %.1f s\n",
			night+1, 2*c.nights, c.v, len(a.Wrong), len(a.Missed), len(a.Mistaken), len(a.False), rehearsed.Sub(start).Seconds(), audited.Sub(rehearsed).Seconds())
		wrong += len(a.Wrong)
		alarms += len(a.False)
		mistaken += len(a.Mistaken)
		for _, step := range a.Missed {
			if sigma := light.change(truth, step, flipped, inverted); sigma < 0.05 {
				faint++
			} else {
				fmt.Fprintf(os.Stderr, "night %d of v = %d: step %d, which changes voxels by %.3f sigma, was missed\n", night+1, c.v, step, sigma)
				missed++
			}
		}
		if len(a.False)+len(a.Mistaken) > 0 {
			fmt.Fprintf(os.Stderr, "night %d of v = %d: false %v, mistaken %v: %v\n", night+1, c.v, a.False, a.Mistaken, a.Night.Audit.Warnings())
		}
		if err := os.RemoveAll(n.Frames(name)); err != nil {
			return nil, err
		}
	}
	at := fmt.Sprintf("v = %d, raw S/N %g: ", c.v, c.sn)
	return []trial.Finding{
		trial.Below(at+"wrong frames missed that change voxels by 0.05 sigma", float64(missed), 1, wrong),
		trial.Stated(at+"wrong frames missed that change less", float64(faint), wrong),
		trial.Below(at+"wrong frames found, but given to a wrong step or to none", float64(mistaken), 1, wrong),
		trial.Below(at+"right frames called wrong, in all nights", float64(alarms), 1, 2*c.nights),
	}, nil
}

// auditKind is what goes wrong in a night: faults, or the order of all masks.
type auditKind struct {
	faults []rehearse.Fault
	order  func(t, n int) int // the step whose mask step t shows; nil for its own
}

func auditKinds() []auditKind {
	fault := func(name string, size float64) rehearse.Fault { return rehearse.Fault{Name: name, Size: size} }
	single := func(list ...rehearse.Fault) auditKind { return auditKind{faults: list} }
	order := func(f func(t, n int) int) auditKind { return auditKind{order: f} }
	return []auditKind{
		single(fault(rehearse.Mislabel, 2)),
		single(fault(rehearse.Mislabel, 4)),
		single(fault(rehearse.Stale, 1)),
		single(fault(rehearse.Stale, 2)),
		single(fault(rehearse.Flip, 1)),
		single(fault(rehearse.Invert, 1)),
		single(fault(rehearse.Flip, 2)),
		single(fault(rehearse.Invert, 2)),
		single(fault(rehearse.Mislabel, 2), fault(rehearse.Lost, 1)),
		order(func(t, n int) int { return (t + 1) % n }),
		order(func(t, n int) int { return (t + n - n/3) % n }),
		order(func(t, n int) int { return n - 1 - t }),
		order(func(t, n int) int { return 2 * t % n }), // n is odd
		order(func(t, n int) int { // a mask passed over, and at the end the first again
			if t < n/4 {
				return t
			}
			return (t + 1) % n
		}),
	}
}

// cleanLight is the readings of a noiseless night without a fault, by science step.
type cleanLight struct {
	v       int
	read    float64
	columns int
	y       map[int][]float64
}

// clean reads the middle rows of a noiseless night in electrons.
func clean(n *trial.Night, name string) (*cleanLight, error) {
	d := n.Field.Profile.Detector
	out := &cleanLight{v: n.Seq.V, read: d.Amplifiers[0].ReadNoiseE, columns: d.Columns, y: map[int][]float64{}}
	for _, i := range n.Seq.StepsOf(sequence.Science) {
		f, err := fitsutil.Open(filepath.Join(n.Frames(name), rehearse.FrameFile(n.Seq.Steps[i].Step)))
		if err != nil {
			return nil, err
		}
		image, err := f.FirstImage()
		if err != nil {
			return nil, err
		}
		w := image.Width()
		raw := make([]float32, w*image.Height())
		if err := image.ReadRows(raw, 0, image.Height()); err != nil {
			return nil, err
		}
		if err := f.Close(); err != nil {
			return nil, err
		}
		var y []float64
		half := d.Columns / 2
		for row := 6; row < d.Rows-6; row++ { // coded rows
			for x := range d.Columns {
				a := d.Amplifiers[x/half]
				level := 0.0 // of the overscan, as the noiseless bias has it
				o := a.Overscan
				for _, v := range raw[row*w+o[0]-1 : row*w+o[1]] {
					level += float64(v) / float64(o[1]-o[0]+1)
				}
				y = append(y, (float64(raw[row*w+x])-level)*a.GainEPerADU)
			}
		}
		out.y[n.Seq.Steps[i].Step] = y
	}
	return out, nil
}

// median is that of the mean readings.
func (l *cleanLight) median() float64 {
	mean := l.mean()
	slices.Sort(mean)
	return mean[len(mean)/2]
}

func (l *cleanLight) mean() []float64 {
	var mean []float64
	for step := 0; step < 10*l.v; step++ { // in order
		y := l.y[step]
		if y == nil {
			continue
		}
		if mean == nil {
			mean = make([]float64, len(y))
		}
		for p, v := range y {
			mean[p] += v / float64(len(l.y))
		}
	}
	return mean
}

// change is the rms change of decoded voxels by the wrong frame labelled with a step, in
// units of their errors: d/(s sqrt v).
func (l *cleanLight) change(truth *rehearse.FaultsTruth, step int, flipped, inverted *cleanLight) float64 {
	shows, from := 0, l
	for _, f := range truth.Frames {
		label := f.Step
		if f.Labelled > 0 {
			label = f.Labelled
		}
		if label != step {
			continue
		}
		switch {
		case f.Flipped:
			from = flipped
		case f.Inverted:
			from = inverted
		}
		if shows = f.Step; f.Shown > 0 {
			shows = f.Shown
		}
	}
	a, b, mean := l.y[step], from.y[shows], l.mean()
	sum := 0.0
	for p := range a {
		d := a[p] - b[p]
		sum += d * d / (mean[p] + l.read*l.read) / float64(l.v) / float64(len(a))
	}
	return math.Sqrt(sum)
}
