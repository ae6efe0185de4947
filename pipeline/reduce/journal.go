package reduce

import (
	"bytes"
	"fmt"
	"slices"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/kept"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/register"
)

// The journal of the strips lies beside the prepared state. Its first record names the
// state and the unfinished cubes; each further one tells what the strips since the last
// one gave, and how far they came.
const journalFile = "strips.journal"

// journalHead is the first record.
type journalHead struct {
	State kept.Digest
	// Cube and Elements are the names of the unfinished files; empty for none.
	Cube, Elements string
}

// stripRecord tells what some strips gave. Rows and Voxels go on where those of the record
// before end; all else is counted from the first strip on.
type stripRecord struct {
	Decoded, Finished, NextOut int
	Rows                       []rowRecord   // of detector rows
	Voxels                     []voxelRecord // of trace rows
	Samples                    []sampleRecord
	SamplesLeft                int
	Steps                      []float64 // stepChi2
	StepNoise                  float64
	Saturated                  []int    // by frame, see frameTally
	CubeSums, ElementSums      []uint32 // see fitsutil.ImageProgress
}

// rowRecord is what decoding a detector row adds to rowQuality.
type rowRecord struct {
	DarkSquare, DarkVariance  float64
	DarkTerms                 int
	Saturated, Restored       int
	Hits, Doubtful            int
	ScaleSum, ScaleMost       float64
	ScalePixels, ScaleApplied int
	CoarseSum                 [scaleColumns]float64
	CoarsePixels              [scaleColumns]int32
	Pulls                     [pullBins]int32
}

// voxelRecord is what a trace row of the cube adds to rowQuality, to the rectifier's added
// variances, and to the picture of the stars.
type voxelRecord struct {
	Good, Covered, Wanted int
	Flags                 int16
	Flagged               [flagBits]int
	Added                 []float32 // of every so many elements
	Picture               *register.PictureRow
}

// sampleRecord is restoredSample.
type sampleRecord struct {
	Column, Line uint32
	Row          uint16
}

func (q *rowQuality) record() rowRecord {
	r := rowRecord{
		DarkSquare: q.dark.square, DarkVariance: q.dark.variance, DarkTerms: q.dark.terms,
		Saturated: q.saturated, Restored: q.restored, Hits: q.hits, Doubtful: q.doubtful,
		ScaleSum: q.scale.all.sum, ScaleMost: q.scale.most, ScalePixels: q.scale.all.n, ScaleApplied: q.scale.applied,
	}
	r.Pulls = q.pulls
	for i, c := range q.scale.coarse {
		r.CoarseSum[i], r.CoarsePixels[i] = c.sum, int32(c.n)
	}
	return r
}

// take puts the row's record back.
func (q *rowQuality) take(r *rowRecord) {
	q.dark = darkChi2{r.DarkSquare, r.DarkVariance, r.DarkTerms}
	q.saturated, q.restored, q.hits, q.doubtful = r.Saturated, r.Restored, r.Hits, r.Doubtful
	q.pulls = r.Pulls
	q.scale.all, q.scale.most, q.scale.applied = scaleSum{r.ScaleSum, r.ScalePixels}, r.ScaleMost, r.ScaleApplied
	for i := range q.scale.coarse {
		q.scale.coarse[i] = scaleSum{r.CoarseSum[i], int(r.CoarsePixels[i])}
	}
}

// forgetDecoding leaves the row as if it had not been decoded.
func (q *rowQuality) forgetDecoding() { q.take(&rowRecord{}) }

// voxels is the record of trace row y.
func (r *reduction) voxels(w *sweep, y int) voxelRecord {
	q := &w.quality[y]
	v := voxelRecord{Good: q.good, Covered: q.covered, Wanted: q.wanted, Flags: q.flags, Flagged: q.flagged}
	for j := 0; j < w.shape.elements; j += addedEvery {
		v.Added = append(v.Added, w.rectify.added[y*w.shape.elements+j])
	}
	if p := r.stars.picture; p != nil {
		row := p.Row(y)
		v.Picture = &row
	}
	return v
}

// fits tells whether a record is one of this reduction's trace rows.
func (v *voxelRecord) fits(r *reduction, elements int) bool {
	p := v.Picture
	return len(v.Added) == (elements+addedEvery-1)/addedEvery && (p == nil) == (r.stars.picture == nil) && (p == nil || p.Fits(elements))
}

// takeVoxels puts the record of trace row y back.
func (r *reduction) takeVoxels(w *sweep, y int, v *voxelRecord) {
	q, n := &w.quality[y], w.shape.elements
	q.good, q.covered, q.wanted, q.flags, q.flagged = v.Good, v.Covered, v.Wanted, v.Flags, v.Flagged
	for i, a := range v.Added {
		w.rectify.added[y*n+i*addedEvery] = a
	}
	if v.Picture != nil {
		r.stars.picture.SetRow(y, *v.Picture)
	}
}

// mark is where the sweep stood at the end of a strip, with what goes on changing after
// it; rows below it change no more.
type mark struct {
	extent
	samples, samplesLeft  int
	steps                 []float64
	stepNoise             float64
	saturated             []int
	cubeSums, elementSums []uint32
}

// voxelImages is the number of the cube's images of voxels, which come first.
const voxelImages = product.ScaleImage + 1

// mark takes stock when so many rows were decoded and these voxels written.
func (r *reduction) mark(w *sweep, decoded int, written writtenVoxels) mark {
	m := mark{
		extent: extent{decoded: decoded, finished: w.finished, nextOut: written.rows}, samples: len(w.samples.list), samplesLeft: w.samples.left,
		steps: append([]float64{}, w.steps.square...), stepNoise: w.steps.noise, saturated: w.reader.tally.saturated(),
	}
	if w.rectify == nil {
		m.finished = decoded
	}
	if r.cube != nil {
		// Voxels may be written meanwhile: their sums are those of the rows told.
		m.cubeSums = r.cube.Sums()
		copy(m.cubeSums[:voxelImages], make([]uint32, voxelImages))
		copy(m.cubeSums, written.sums)
	}
	if r.element != nil {
		m.elementSums = r.element.Sums()
	}
	return m
}

// record tells what came between two marks.
func (r *reduction) record(w *sweep, last, m *mark) ([]byte, error) {
	s := stripRecord{
		Decoded: m.decoded, Finished: m.finished, NextOut: m.nextOut,
		SamplesLeft: m.samplesLeft, Steps: m.steps, StepNoise: m.stepNoise, Saturated: m.saturated, CubeSums: m.cubeSums, ElementSums: m.elementSums,
	}
	for y := last.decoded; y < m.decoded; y++ {
		s.Rows = append(s.Rows, w.quality[y].record())
	}
	for y := last.nextOut; y < m.nextOut; y++ {
		s.Voxels = append(s.Voxels, r.voxels(w, y))
	}
	for _, one := range w.samples.list[last.samples:m.samples] {
		s.Samples = append(s.Samples, sampleRecord{one.column, one.line, one.row})
	}
	return encodeRecord(s)
}

func encodeRecord(value any) ([]byte, error) {
	var b bytes.Buffer
	err := kept.Encode(&b, value)
	return b.Bytes(), err
}

// decodeRecord reads a record that holds one value and nothing else.
func decodeRecord(record []byte, target any) error {
	d := kept.NewDecoder(bytes.NewReader(record), int64(len(record)))
	if err := d.Decode(target); err != nil {
		return err
	}
	if !d.Ended() {
		return fmt.Errorf("%w (too long)", kept.ErrUnfit)
	}
	return nil
}

// take adds a record to what a sweep took up before, up to mark m, and moves m. It tells
// whether the record follows; if not, nothing changes.
func (r *reduction) take(w *sweep, m *mark, s *stripRecord) bool {
	rows := w.shape.rows
	unfit := func(v voxelRecord) bool { return !v.fits(r, w.shape.elements) }
	switch {
	case s.Decoded < m.decoded || s.Decoded == 0 || s.Decoded > rows || len(s.Rows) != s.Decoded-m.decoded,
		s.NextOut < m.nextOut || s.NextOut > rows || len(s.Voxels) != s.NextOut-m.nextOut,
		s.Finished < m.finished || s.Finished > s.Decoded,
		w.rectify == nil && s.NextOut > 0,
		len(s.Steps) != len(w.steps.square) || len(s.Saturated) != len(w.reader.tally.frames),
		len(w.samples.list)+len(s.Samples) > mostRestored,
		slices.ContainsFunc(s.Voxels, unfit):
		return false
	}
	for i := range s.Rows {
		w.quality[m.decoded+i].take(&s.Rows[i])
	}
	for i := range s.Voxels {
		r.takeVoxels(w, m.nextOut+i, &s.Voxels[i])
	}
	for _, one := range s.Samples {
		w.samples.list = append(w.samples.list, restoredSample{column: one.Column, line: one.Line, row: one.Row})
	}
	w.samples.left = s.SamplesLeft
	w.steps = stepChi2{square: s.Steps, noise: s.StepNoise}
	*m = mark{
		extent: extent{s.Decoded, s.Finished, s.NextOut}, samples: len(w.samples.list), samplesLeft: s.SamplesLeft,
		steps: s.Steps, stepNoise: s.StepNoise, saturated: s.Saturated, cubeSums: s.CubeSums, elementSums: s.ElementSums,
	}
	return true
}

// cubeProgress is what the mark says of the images of a cube: the decoded light's have all
// rows of voxels that were written, PIXELVAR those of the detector that are fit, and the
// responses none.
func (m *mark) cubeProgress() []fitsutil.ImageProgress {
	rows := []int{product.SignalImage: m.nextOut, product.VarianceImage: m.nextOut, product.FlagsImageIndex: m.nextOut, product.ScaleImage: m.nextOut, product.PixelVarianceImage: m.finished}
	all := make([]fitsutil.ImageProgress, len(m.cubeSums))
	for i, sum := range m.cubeSums {
		if i < len(rows) {
			all[i] = fitsutil.ImageProgress{Rows: rows[i], Sum: sum}
		}
	}
	return all
}

// elementProgress is the same of the element cube.
func (m *mark) elementProgress() []fitsutil.ImageProgress {
	var all []fitsutil.ImageProgress
	for _, sum := range m.elementSums {
		all = append(all, fitsutil.ImageProgress{Rows: m.decoded, Sum: sum})
	}
	return all
}
