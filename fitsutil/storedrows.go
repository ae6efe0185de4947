package fitsutil

// StoredRows holds some rows of an image as they are on disk, to be converted piece by
// piece: what is needed of a row more than once, or in several pieces, is read once. The
// zero value holds none. Reuse one from read to read; one goroutine at a time.
type StoredRows struct {
	im     *Image
	y0, y1 int
	bytes  []byte
}

// Read holds rows y0 to y1-1 of the first plane of im from now on, and reads them unless it
// holds them already. It grows to their size. After an error it holds none.
func (s *StoredRows) Read(im *Image, y0, y1 int) error {
	if s.im == im && y0 >= s.y0 && y1 <= s.y1 {
		return nil
	}
	s.im = nil
	if y0 < 0 || y1 < y0 || y1 > im.Height() {
		return im.rangeError("there are no rows %d to %d: the image has %d", y0, y1, im.Height())
	}
	n := (y1 - y0) * im.Width() * int(im.sample)
	if cap(s.bytes) < n {
		s.bytes = make([]byte, n)
	}
	s.bytes = s.bytes[:n]
	if err := im.readBytes(s.bytes, int64(y0)*int64(im.Width())); err != nil {
		return err
	}
	s.im, s.y0, s.y1 = im, y0, y1
	return nil
}

// Convert fills dst with the physical values (see Image) of row y from column x0 on. ErrRange
// says that they are not held.
func (s *StoredRows) Convert(dst []float32, x0, y int) error {
	im := s.im
	if im == nil {
		return fileError("", ErrRange, "pixels are converted and none were read", "")
	}
	if y < s.y0 || y >= s.y1 || x0 < 0 || x0+len(dst) > im.Width() {
		return im.rangeError("there are no columns %d to %d of row %d: rows %d to %d of %d columns were read", x0, x0+len(dst), y, s.y0, s.y1, im.Width())
	}
	at := ((y-s.y0)*im.Width() + x0) * int(im.sample)
	im.scale.convert(dst, s.bytes[at:at+len(dst)*int(im.sample)])
	return nil
}

// RowBytes is the size of a row on disk.
func (im *Image) RowBytes() int { return im.Width() * int(im.sample) }
