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

// Flag is a bit of FLAGS with its name and what it says of a voxel.
type Flag struct {
	Bit  int16
	Name string
	Says string
}

// Flags lists the bits in the order of their values.
func Flags() []Flag {
	return []Flag{
		{FlagNoData, "NODATA", "no light of it was recorded: it lies off the detector, or in a closed, sentinel or unlit row"},
		{FlagSaturated, "SATURATED", "a sample that reaches it was saturated and could not be restored"},
		{FlagBadPixel, "BADPIXEL", "a pixel that reaches it is bad, or was struck by cosmic rays in samples that cannot be told"},
		{FlagLowFlat, "LOWFLAT", "too little light comes there to divide by the response, or no flat was measured"},
		{FlagLost, "LOST", "too many frames are missing to decode it"},
		{FlagPartial, "PARTIAL", "less than 99 % of it is covered by data"},
		{FlagNominalWave, "NOMINALWAVE", "its wavelength is the profile's: no arc told it"},
		{FlagRestored, "RESTORED", "samples of it were lost or struck, and restored from the dark columns"},
		{FlagSkyLine, "SKYLINE", "a bright line of the sky was subtracted there"},
		{FlagSentinel, "SENTINEL", "it lies in a sentinel row"},
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
