package combine

import (
	"math"

	"mirrorloom/pipeline/product"
)

// voxels add up the runs in some rows of one wavelength, [row][element].
type voxels struct {
	elements int
	// rank is what the runs that were added so far gave: see rank.
	rank  []int8
	flags []int16
	// weight is sum(1/V), light sum(S/V), scale sum(q/V).
	weight, light, scale []float64
}

// What a run gives of a voxel.
const (
	noLight int8 = iota // nothing
	badLight
	goodLight
)

func newVoxels(elements, rows int) *voxels {
	n := elements * rows
	return &voxels{
		elements: elements, rank: make([]int8, n), flags: make([]int16, n),
		weight: make([]float64, n), light: make([]float64, n), scale: make([]float64, n),
	}
}

// reset begins anew with n voxels.
func (a *voxels) reset(n int) {
	a.rank, a.flags = a.rank[:n], a.flags[:n]
	a.weight, a.light, a.scale = a.weight[:n], a.light[:n], a.scale[:n]
	clear(a.rank)
	clear(a.flags)
	clear(a.weight)
	clear(a.light)
	clear(a.scale)
}

// rank of a voxel of a run.
func rank(flags int16, signal, variance float32) int8 {
	usable := variance > 0 && !math.IsInf(float64(variance), 0) && !math.IsInf(float64(signal), 0) && signal == signal
	switch {
	case flags&product.FlagNoData != 0 || !usable:
		return noLight
	case flags&product.FlagBad != 0:
		return badLight
	}
	return goodLight
}

// add takes the voxel of a run into voxel i. A run in which it is good puts those in
// which it is not aside.
func (a *voxels) add(i int, signal, variance float32, flags int16, scale float32) {
	r := rank(flags, signal, variance)
	switch {
	case r < a.rank[i]:
		return
	case r > a.rank[i]:
		a.rank[i], a.flags[i] = r, 0
		a.weight[i], a.light[i], a.scale[i] = 0, 0, 0
	}
	a.flags[i] |= flags
	if r == noLight {
		return
	}
	w := 1 / float64(variance)
	a.weight[i] += w
	a.light[i] += w * float64(signal)
	a.scale[i] += w * float64(scale)
}

// result writes voxel i.
func (a *voxels) result(i int, signal, variance []float32, flags []int16, scale []float32) {
	flags[i] = a.flags[i]
	if a.rank[i] == noLight {
		nan := float32(math.NaN())
		signal[i], variance[i], scale[i] = nan, nan, 1
		flags[i] |= product.FlagNoData
		return
	}
	w := a.weight[i]
	signal[i], variance[i], scale[i] = float32(a.light[i]/w), float32(1/w), float32(a.scale[i]/w)
}
