package pair

import (
	"compress/gzip"
	"fmt"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// The tests' sequence: 2 bias, 1 dark, all-off, 7 science, all-off, flat.
const (
	stepDark     = 3
	stepOffA     = 4
	firstScience = 5
	stepOffB     = 12
	stepFlat     = 13
	allSteps     = 13
)

// smallSequence is a sequence of 13 steps for a detector of 12 x 6 raw pixels.
func smallSequence(t testing.TB) *sequence.Sequence {
	t.Helper()
	p, err := instrument.Load("optical")
	require.NoError(t, err)
	p.Detector.Columns, p.Detector.Rows = 8, 6
	p.Detector.Amplifiers = []instrument.Amplifier{{Data: instrument.Section{1, 8, 1, 6}, Overscan: instrument.Overscan{9, 12, 1, 6}, GainEPerADU: 1}}
	code, err := hadamard.New("m-sequence", 7)
	require.NoError(t, err)
	s := &sequence.Sequence{Family: "m-sequence", V: 7, Profile: p, Target: &sequence.Target{Name: "Field"}}
	for j := range 7 {
		s.Elements = append(s.Elements, sequence.Element{Column: j, Element: j, First: 10 + j, Last: 10 + j})
	}
	s.Rows = []sequence.RowRange{{First: 0, Last: p.DMD.Rows - 1, Use: sequence.UseCoded, Element: -1}}
	add := func(kind sequence.Kind, lamp string, exptime float64, row int, bits []uint8) {
		s.Steps = append(s.Steps, sequence.Step{Step: len(s.Steps) + 1, Kind: kind, Lamp: lamp, ExptimeSeconds: exptime, Row: row})
		s.Code = append(s.Code, bits)
	}
	off, on := make([]uint8, 7), []uint8{1, 1, 1, 1, 1, 1, 1}
	add(sequence.Bias, "", 0, -1, off)
	add(sequence.Bias, "", 0, -1, off)
	add(sequence.Dark, "", 30, -1, off)
	add(sequence.AllOff, "", 90, -1, off)
	for r := range 7 {
		add(sequence.Science, "", 90, r, code.Row(r))
	}
	add(sequence.AllOff, "", 90, -1, off)
	add(sequence.Flat, "halogen", 5, -1, on)
	for i := range s.Steps {
		s.Steps[i].MaskID = s.Mask(i).ID()
	}
	require.Len(t, s.Steps, allSteps)
	return s
}

// shot is a frame to be written.
type shot struct {
	name   string
	header *fitsutil.Header
	axes   []int
	// extension puts the image behind an empty primary HDU with these cards.
	extension bool
	primary   *fitsutil.Header
	packed    bool
	bytes     []byte // written instead of a FITS file
}

// takeNight gives the frames that a faultless night has, f00001.fits ... , taken
// a minute apart.
func takeNight(s *sequence.Sequence) []*shot {
	d := &s.Profile.Detector
	var shots []*shot
	for i, st := range s.Steps {
		word, _ := s.Profile.Kinds.Word(string(st.Kind))
		k := s.Profile.Keywords
		shots = append(shots, &shot{
			name: fmt.Sprintf("f%05d.fits", st.Step),
			axes: []int{d.RawColumns(), d.RawRows()},
			header: fitsutil.NewHeader(
				fitsutil.Card{Key: k.Instrume, Value: s.Profile.Name},
				fitsutil.Card{Key: k.Step, Value: int64(st.Step)},
				fitsutil.Card{Key: k.MaskID, Value: st.MaskID},
				fitsutil.Card{Key: k.Kind, Value: word},
				fitsutil.Card{Key: k.Exptime, Value: st.ExptimeSeconds},
				fitsutil.Card{Key: k.DateObs, Value: dateOf(i)},
				fitsutil.Card{Key: k.Airmass, Value: 1.25},
			),
		})
	}
	return shots
}

// dateOf is DATE-OBS of the frame taken i minutes into the night.
func dateOf(minutes int) string {
	return time.Date(2031, 3, 14, 2, 30, 0, 0, time.UTC).Add(time.Duration(minutes) * time.Minute).Format("2006-01-02T15:04:05.000")
}

func (f *shot) set(t testing.TB, key string, value any) {
	t.Helper()
	require.NoError(t, f.header.Set(key, value, ""))
}

// writeNight writes shots into a new folder.
func writeNight(t testing.TB, shots []*shot) string {
	t.Helper()
	dir := t.TempDir()
	for _, f := range shots {
		f.write(t, filepath.Join(dir, f.name))
	}
	return dir
}

func (f *shot) write(t testing.TB, path string) {
	t.Helper()
	if f.bytes != nil {
		require.NoError(t, os.WriteFile(path, f.bytes, 0o644))
		return
	}
	pixels := 1
	for _, n := range f.axes {
		pixels *= n
	}
	im := &fitsutil.ImageData{Header: f.header, Axes: f.axes, Data: make([]uint16, pixels)}
	target := path
	if f.packed {
		target = filepath.Join(t.TempDir(), "plain.fits")
	}
	if f.extension {
		im.Name = "RAW"
		primary := f.primary
		if primary == nil {
			primary = fitsutil.NewHeader()
		}
		require.NoError(t, fitsutil.WriteFile(target, primary, im))
	} else {
		require.NoError(t, fitsutil.WriteFile(target, nil, im))
	}
	if f.packed {
		pack(t, target, path)
	}
}

func pack(t testing.TB, from, to string) {
	t.Helper()
	data, err := os.ReadFile(from)
	require.NoError(t, err)
	out, err := os.Create(to)
	require.NoError(t, err)
	z := gzip.NewWriter(out)
	_, err = z.Write(data)
	require.NoError(t, err)
	require.NoError(t, z.Close())
	require.NoError(t, out.Close())
}
