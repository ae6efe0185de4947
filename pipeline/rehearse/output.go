package rehearse

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// openOutputs creates the scratch file and lays out truth.fits.
func (r *rehearsal) openOutputs() error {
	var err error
	if r.scratch, err = os.OpenFile(filepath.Join(r.dir, scratchFile), os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o600); err != nil {
		return err
	}
	if r.opts.NoTruth {
		return nil
	}
	return r.openTruth()
}

func (r *rehearsal) openTruth() error {
	schema := product.NewSchema(r.seq)
	var images []fitsutil.ImageSpec
	for _, name := range []string{product.Signal, product.Sky} {
		h, err := schema.Header(product.UnitSignal)
		if err != nil {
			return err
		}
		images = append(images, fitsutil.ImageSpec{Name: name, Header: h, BITPIX: -32, Axes: schema.Axes()})
	}
	primary := fitsutil.NewHeader(
		fitsutil.Card{Key: "OBJECT", Value: schema.Object, Comment: "target"},
		fitsutil.Card{Key: "PROFNAME", Value: r.seq.ProfileName, Comment: "instrument profile"},
		fitsutil.Card{Key: "PROFSHA", Value: r.seq.ProfileSHA, Comment: "SHA-256 of the profile"},
		fitsutil.Card{Key: "SEQSHA", Value: r.seq.SHA, Comment: "SHA-256 of the sequence"},
		fitsutil.Card{Key: "EXPTIME", Value: r.dwell, Comment: "seconds of a science exposure"},
	)
	var err error
	r.truth, err = fitsutil.CreateCube(filepath.Join(r.dir, TruthFolder, TruthFile), primary, images)
	return err
}

// The images of truth.fits by their place.
const (
	signalImage = iota
	skyImage
)

// writeTruth writes a strip's voxels.
func (r *rehearsal) writeTruth(d *drawn) error {
	if r.truth == nil {
		return nil
	}
	h, planes := d.y1-d.y0, r.optics.profile.Grid.Count
	if err := r.truth.WriteStrip(signalImage, d.y0, h, 0, planes, d.signal); err != nil {
		return err
	}
	r.bytes.Add(8 * int64(len(d.signal)))
	return r.truth.WriteStrip(skyImage, d.y0, h, 0, planes, d.sky)
}

// closeOutputs removes the scratch file and finishes truth.fits, or drops it.
func (r *rehearsal) closeOutputs(whole bool) error {
	var errs []error
	if r.scratch != nil {
		errs = append(errs, r.scratch.Close(), os.Remove(r.scratch.Name()))
	}
	switch {
	case r.truth == nil:
	case whole:
		errs = append(errs, r.truth.Commit())
	default:
		errs = append(errs, r.truth.Abort())
	}
	return errors.Join(errs...)
}

// writeTexts writes the small files of truth.
func (r *rehearsal) writeTexts() error {
	geometry, err := r.optics.geometry.YAML()
	if err != nil {
		return err
	}
	scene, err := r.scene.YAML()
	if err != nil {
		return err
	}
	faults, err := r.faultsJSON()
	if err != nil {
		return err
	}
	texts := map[string][]byte{GeometryFile: geometry, SceneFile: scene, FaultsFile: faults}
	if r.air != nil {
		if texts[AirFile], err = r.airJSON(); err != nil {
			return err
		}
	}
	if len(r.seq.StepsOf(sequence.RefStar)) > 0 {
		texts[StarFile] = r.starTable()
	}
	for name, data := range r.scene.Files() {
		if _, taken := texts[name]; taken {
			return fmt.Errorf("scene: its file %s has a name of the truth's own; give it another", name)
		}
		texts[name] = data
	}
	for name, data := range texts {
		err := fitsutil.WriteAtomic(filepath.Join(r.dir, TruthFolder, name), func(w io.Writer) error {
			_, err := w.Write(data)
			return err
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// writeFrames writes the FITS files from the scratch file.
func (r *rehearsal) writeFrames(ctx context.Context) error {
	starts, err := r.starts()
	if err != nil {
		return err
	}
	return parallel.Do(ctx, r.opts.Workers, len(r.steps), func(_, k int) error {
		defer r.advance(1)
		if r.fates[k].lost {
			return nil
		}
		return r.writeFrame(k, starts[k])
	})
}

func (r *rehearsal) writeFrame(k int, start time.Time) error {
	rows, columns := len(r.detector.rows), r.detector.rawColumns
	raw := make([]byte, int64(rows)*int64(columns)*r.sampleBytes())
	if _, err := r.scratch.ReadAt(raw, int64(k)*int64(len(raw))); err != nil {
		return err
	}
	header, err := r.frameHeader(k, start)
	if err != nil {
		return err
	}
	image := &fitsutil.ImageData{Header: header, Axes: []int{columns, rows}, Data: samples(raw, r.opts.Noiseless)}
	r.bytes.Add(int64(len(raw)))
	return fitsutil.WriteFile(filepath.Join(r.dir, FrameFile(r.seq.Steps[k].Step)), nil, image)
}

// samples reads the scratch file's order of bytes.
func samples(raw []byte, noiseless bool) any {
	if noiseless {
		data := make([]float32, len(raw)/4)
		for i := range data {
			data[i] = math.Float32frombits(binary.LittleEndian.Uint32(raw[4*i:]))
		}
		return data
	}
	data := make([]uint16, len(raw)/2)
	for i := range data {
		data[i] = binary.LittleEndian.Uint16(raw[2*i:])
	}
	return data
}

// starts gives the start of each exposure: the target's, then exposures and
// readouts one after the other.
func (r *rehearsal) starts() ([]time.Time, error) {
	at, err := r.seq.Target.Start()
	if err != nil {
		return nil, err
	}
	list := make([]time.Time, len(r.seq.Steps))
	for i, st := range r.seq.Steps {
		list[i] = at
		at = at.Add(time.Duration((st.ExptimeSeconds + r.seq.Profile.OverheadS()) * float64(time.Second)))
	}
	return list, nil
}

// frameHeader makes the cards of a frame under the profile's keywords.
func (r *rehearsal) frameHeader(k int, start time.Time) (*fitsutil.Header, error) {
	p, t, st := r.seq.Profile, r.seq.Target, r.seq.Steps[k]
	label := r.seq.Steps[r.fates[k].labels]
	key := p.Keywords
	kind, ok := p.Kinds.Word(string(st.Kind))
	if !ok {
		return nil, fmt.Errorf("frame header: the profile has no word for the kind %s", st.Kind)
	}
	ra, dec := r.pointing(k)
	object, place := t.Name, "field's centre"
	if st.Kind == sequence.RefStar {
		object, place = t.Calibration.RefStar.Name, "reference star"
	}
	cards := []fitsutil.Card{
		{Key: key.Instrume, Value: p.Name, Comment: "instrument profile"},
		{Key: "OBJECT", Value: object, Comment: "target"},
		{Key: key.Step, Value: label.Step, Comment: "step of the sequence"},
		{Key: key.MaskID, Value: label.MaskID, Comment: "digest of the mask"},
		{Key: key.Kind, Value: kind, Comment: "kind of the step"},
		{Key: key.Exptime, Value: st.ExptimeSeconds, Comment: "exposure time, s"},
		{Key: key.DateObs, Value: start.UTC().Format("2006-01-02T15:04:05.000"), Comment: "start of the exposure, UTC"},
		{Key: key.RA, Value: ra, Comment: "right ascension of the " + place + ", deg"},
		{Key: key.Dec, Value: dec, Comment: "declination of the " + place + ", deg"},
		{Key: key.RotAng, Value: t.RotangDeg, Comment: "position angle of the slit, deg"},
	}
	if x := physics.TargetAirmass(ra, dec, middleOf(st, start), p.Site.LatitudeDeg, p.Site.LongitudeEastDeg); !math.IsNaN(x) {
		cards = append(cards, fitsutil.Card{Key: key.Airmass, Value: x, Comment: "of the middle of the exposure"})
	}
	if st.Lamp != "" {
		cards = append(cards, fitsutil.Card{Key: "LAMP", Value: st.Lamp, Comment: "calibration lamp"})
	}
	h := fitsutil.NewHeader()
	for _, c := range cards {
		if err := h.Set(c.Key, c.Value, c.Comment); err != nil {
			return nil, fmt.Errorf("frame header: %w", err)
		}
	}
	return h, nil
}
