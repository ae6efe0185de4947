package product

import "fmt"

// The bits of FLAGS. Bit 128 is not used.
const (
	FlagNoData      = 1    // no light of this voxel was recorded; SIGNAL is NaN
	FlagSaturated   = 2    // a sample that reaches the voxel was saturated
	FlagBadPixel    = 4    // a bad pixel reaches the voxel with a weight above 0.1
	FlagLowFlat     = 8    // the response is too low to be divided by
	FlagLost        = 16   // too many frames are missing to decode the voxel
	FlagPartial     = 32   // less than 99 % of the voxel is covered by data
	FlagNominalWave = 64   // the wavelength is the profile's, as the arcs failed
	FlagRestored    = 256  // lost samples were restored from the dark columns
	FlagSkyLine     = 512  // a bright sky line was subtracted here
	FlagSentinel    = 1024 // the row is a sentinel row

	// FlagBad is the mask of the bits that make a voxel bad.
	FlagBad = 127
)

// Flag is a bit of FLAGS with its name.
type Flag struct {
	Bit  int16
	Name string
}

// Flags lists the bits in the order of their values.
func Flags() []Flag {
	return []Flag{
		{FlagNoData, "NODATA"}, {FlagSaturated, "SATURATED"}, {FlagBadPixel, "BADPIXEL"},
		{FlagLowFlat, "LOWFLAT"}, {FlagLost, "LOST"}, {FlagPartial, "PARTIAL"},
		{FlagNominalWave, "NOMINALWAVE"}, {FlagRestored, "RESTORED"}, {FlagSkyLine, "SKYLINE"},
		{FlagSentinel, "SENTINEL"},
	}
}

// flagCards names the bits on cards FLAG01, FLAG02, ...: "<bit> <name>".
func flagCards() []card {
	cards := []card{{"FLAGBAD", FlagBad, "good voxels have FLAGS & FLAGBAD = 0"}}
	for i, f := range Flags() {
		cards = append(cards, card{fmt.Sprintf("FLAG%02d", i+1), fmt.Sprintf("%d %s", f.Bit, f.Name), ""})
	}
	return cards
}
