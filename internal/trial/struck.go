package trial

import (
	"context"
	"path/filepath"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Struck is the science frames of a night with cosmic rays, and which of their
// samples they struck. Rays are drawn apart from all other noise, so that the same
// night without them has the same samples elsewhere.
type Struck struct {
	Width, Rows int
	// Frames are in electrons above the bias level, [frame][pixel]; Noise is that of
	// each.
	Frames [][]float32
	Noise  calib.FrameNoise
	// Flags mark the dead columns, which a lamp would tell.
	Flags []calib.Flag
	// Height is how far a ray lifts a sample, in sigmas of what it would have
	// without: 0 where none struck.
	Height [][]float64
}

// MakeStruck rehearses the night twice, with perThousand struck samples per 1000 and
// without, and reads every so many-th science frame of both.
func (n *Night) MakeStruck(ctx context.Context, name string, seed uint64, perThousand float64, every int) (*Struck, error) {
	clean := name + "-clean"
	opts := rehearse.Options{Seed: seed, NoTruth: true}
	if err := n.Rehearse(ctx, clean, opts); err != nil {
		return nil, err
	}
	opts.Faults = []rehearse.Fault{{Name: rehearse.Cosmic, Size: perThousand}}
	if err := n.Rehearse(ctx, name, opts); err != nil {
		return nil, err
	}
	truth, err := n.Faults(name)
	if err != nil {
		return nil, err
	}
	camera, err := exposure.NewCamera(&n.Seq.Profile.Detector)
	if err != nil {
		return nil, err
	}
	s := &Struck{Width: camera.Columns, Rows: camera.Rows, Flags: make([]calib.Flag, camera.Columns*camera.Rows)}
	for _, x := range truth.DeadColumns {
		for y := range s.Rows {
			s.Flags[y*s.Width+x] = calib.BadPixel
		}
	}
	s.Noise.Photon = 1 + camera.PhotonExcess
	for _, row := range camera.Variance {
		for _, v := range row {
			s.Noise.Read = append(s.Noise.Read, float32(v))
		}
	}
	science := 0
	for i, step := range n.Seq.Steps {
		if step.Kind != sequence.Science {
			continue
		}
		if science++; science%every == 0 {
			if err := s.add(camera, n.Frames(name), n.Frames(clean), truth.Frames[i]); err != nil {
				return nil, err
			}
		}
	}
	return s, nil
}

// add reads a science frame with and without rays.
func (s *Struck) add(camera *exposure.Camera, dir, cleanDir string, truth rehearse.FrameTruth) error {
	frame, err := readWhole(camera, filepath.Join(dir, truth.File))
	if err != nil {
		return err
	}
	clean, err := readWhole(camera, filepath.Join(cleanDir, truth.File))
	if err != nil {
		return err
	}
	heights := make([]float64, len(frame))
	for k, x := range truth.HitX {
		i := truth.HitY[k]*s.Width + x
		heights[i] = truth.HitE[k] / s.sigma(i, clean[i])
	}
	s.Frames, s.Height = append(s.Frames, frame), append(s.Height, heights)
	return nil
}

// readWhole reads a frame in electrons; a saturated sample stays as it is.
func readWhole(camera *exposure.Camera, path string) ([]float32, error) {
	file, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	defer file.Close() // only read from
	image, err := file.FirstImage()
	if err != nil {
		return nil, err
	}
	pixels := make([]float32, camera.Columns*camera.Rows)
	_, err = camera.Read(pixels, image, 0, camera.Rows, new(exposure.Scratch), func([]calib.Flag, int, int, int) {})
	return pixels, err
}
