package calib

// GrowColumns spreads a flag along columns to reach pixels on each side, in place:
// charge that a full pixel cannot hold bleeds along its column. flags are rows of
// width, one after the other; give reach rows more on both sides of a block of a
// frame. It returns how many pixels were added.
func GrowColumns(flags []Flag, width, reach int, bit Flag) int {
	return grow(flags, width, bit, func(dx, dy int) bool { return dx == 0 }, reach)
}

// GrowAround spreads a flag to the pixels within a square of reach around each, in
// place: the neighbours of a hot or dead pixel that its charge, or its glow, takes in.
// Otherwise as GrowColumns.
func GrowAround(flags []Flag, width, reach int, bit Flag) int {
	return grow(flags, width, bit, func(dx, dy int) bool { return true }, reach)
}

func grow(flags []Flag, width int, bit Flag, takes func(dx, dy int) bool, reach int) int {
	if width < 1 || reach < 1 {
		return 0
	}
	height := len(flags) / width
	var seeds []int
	for i, f := range flags[:height*width] {
		if f&bit != 0 {
			seeds = append(seeds, i)
		}
	}
	added := 0
	for _, i := range seeds {
		x, y := i%width, i/width
		for dy := max(-reach, -y); dy <= min(reach, height-1-y); dy++ {
			for dx := max(-reach, -x); dx <= min(reach, width-1-x); dx++ {
				at := i + dy*width + dx
				if takes(dx, dy) && flags[at]&bit == 0 {
					flags[at] |= bit
					added++
				}
			}
		}
	}
	return added
}
