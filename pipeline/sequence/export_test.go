package sequence

import "context"

// WriteWith is Write on so many workers.
func (s *Sequence) WriteWith(ctx context.Context, dir string, workers int) error {
	return s.write(ctx, dir, workers)
}

// WriteFITS writes sequence.fits as the fields stand, consistent or not.
func (s *Sequence) WriteFITS(path string) error { return s.writeFITS(path) }
