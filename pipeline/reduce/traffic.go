package reduce

import (
	"os"
	"path/filepath"
	"time"

	"go.uber.org/zap"
	"golang.org/x/sys/unix"

	"mirrorloom/pipeline/product"
)

// timed runs a stage, which gives the bytes that it read and wrote, and takes note of where
// its time went.
func (r *reduction) timed(name string, stage func() (bytes int64, err error)) error {
	start, processor := time.Now(), processorSeconds()
	read, written := r.traffic.Read(), r.traffic.Written()
	bytes, err := stage()
	if err != nil {
		return err
	}
	s := product.NewStage(name, time.Since(start).Seconds(), bytes, (r.traffic.Read().Busy - read.Busy).Seconds(),
		(r.traffic.Written().Busy - written.Busy).Seconds(), processorSeconds()-processor, r.opts.Workers)
	r.stages = append(r.stages, s)
	r.log.Info("stage done", zap.String("stage", name), zap.Float64("seconds", s.Seconds), zap.Int64("bytes", bytes))
	return nil
}

// processorSeconds is the processor's time of this process, of its own and of the system
// for it.
func processorSeconds() float64 {
	var u unix.Rusage
	if err := unix.Getrusage(unix.RUSAGE_SELF, &u); err != nil {
		return 0 // the table then shows no computing
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano()).Seconds()
}

// frameBytes is the size of a raw frame's pixels on disk, taken from the first.
func (r *reduction) frameBytes() int64 {
	if len(r.album.Frames) == 0 {
		return 0
	}
	im := r.album.Frames[0].Image
	return int64(max(im.BITPIX, -im.BITPIX)/8) * int64(im.Width()) * int64(im.Height())
}

// masterBytes is the size of the masters.
func (r *reduction) masterBytes() int64 {
	return int64(r.camera.Columns) * int64(r.camera.Rows) * masterCount * bytesFloat
}

// lookAt counts frames, read whole by calibrate.
func (r *reduction) lookAt(frames int) { r.looked.Add(r.frameBytes() * int64(frames)) }

// stripBytes is what the strips stage read and wrote.
func (r *reduction) stripBytes(s shape) int64 {
	bytes := r.frameBytes()*int64(r.roles.science) + r.masterBytes()
	if s.cube {
		bytes += s.cubeBytes()
	}
	if s.elementCube {
		bytes += s.elementBytes()
	}
	return bytes
}

// cubeBytes are those of the cube's images, elementBytes of the element cube's.
func (s shape) cubeBytes() int64 {
	return int64(s.elements) * int64(s.rows) * int64(s.voxels) * bytesVoxel
}

func (s shape) elementBytes() int64 {
	return int64(s.slots) * int64(s.columns) * int64(s.rows) * (4 + 4 + 2)
}

// finishBytes is what the finish stage wrote: the ledger, and of the cubes all but
// the images, which the strips stage wrote.
func (r *reduction) finishBytes() (int64, error) {
	var bytes int64
	for _, f := range []struct {
		name   string
		exists bool
		images int64
	}{
		{product.LedgerFile, true, 0},
		{product.CubeFile, r.cube != nil, r.shape.cubeBytes()},
		{product.ElementsFile, r.element != nil, r.shape.elementBytes()},
	} {
		if !f.exists {
			continue
		}
		info, err := os.Stat(filepath.Join(r.opts.Out, f.name))
		if err != nil {
			return 0, err
		}
		bytes += info.Size() - f.images
	}
	return bytes, nil
}
