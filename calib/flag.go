package calib

// Flag is the state of a pixel or voxel: bits as in the cube's image FLAGS. The
// type is that image's own, so that a row goes to disk as it is.
type Flag = int16

// The bits that this package sets or reads; their numbers are the cube's contract.
const (
	NoData    Flag = 1   // no light could be measured here
	Saturated Flag = 2   // a raw value at or above the saturation level
	BadPixel  Flag = 4   // a hot, dead or struck pixel
	LowFlat   Flag = 8   // too little lamp light to divide by
	Partial   Flag = 32  // less than 99 % of the voxel lies on the detector
	SkyLine   Flag = 512 // a line of the sky dominates
)

// reachLimit: a flagged pixel voids the voxels that it reaches with a weight of
// more than this (the cube's contract). Below it the pixel's value has been
// replaced, to a few per cent of a line's peak, so that less than 0.5 % arrives.
const reachLimit = 0.1

// Coverage limits: below fullCover a voxel is Partial (the cube's contract);
// below halfCover it says more about the interpolation than about the sky, and is
// NoData.
const (
	fullCover = 0.99
	halfCover = 0.5
)
