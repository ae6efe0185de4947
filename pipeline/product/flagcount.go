package product

// FlagCount is how many voxels have a flag, of those in coded rows whose wavelength falls
// on the detector.
type FlagCount struct {
	Name   string `json:"name"`
	Bit    int16  `json:"bit"`
	Voxels int    `json:"voxels"`
	// Share is Voxels over all those.
	Share float64 `json:"share"`
}

// FlagShare is the part of the voxels that have the flag of a bit; 0 where flags were not
// counted.
func (q Quality) FlagShare(bit int16) float64 {
	for _, f := range q.Flags {
		if f.Bit == bit {
			return f.Share
		}
	}
	return 0
}
