package reduce

import (
	"slices"

	"mirrorloom/calib"
	"mirrorloom/pipeline/skyflux"
)

// beyond lengthens a grid by voxels as wide as those at its ends, as far as light of the
// open elements can be seen on the detector.
func (r *reduction) beyond(edges []float64, first, last int) ([]float64, int) {
	g, n := r.rectifier.geometry, len(edges)
	low, high := edges[1]-edges[0], edges[n-1]-edges[n-2]
	most := 0
	seen := func(nm float64) bool {
		for _, j := range []int{first, last} {
			if x := g.X(float64(j), g.Y_c, nm); !(x >= 0 && x <= float64(r.camera.Columns-1)) {
				return false
			}
		}
		return true
	}
	for k := 1; k <= mostBeyond; k++ {
		from, to := edges[0]-float64(k)*low, edges[n-1]+float64(k)*high
		if !(from > 0) || g.Check(r.camera.Columns, r.camera.Rows, min(from, to), max(from, to)) != nil || !seen(from) && !seen(to) {
			break
		}
		most = k
	}
	out := make([]float64, 0, n+2*most)
	for k := most; k >= 1; k-- {
		out = append(out, edges[0]-float64(k)*low)
	}
	out = append(out, edges...)
	for k := 1; k <= most; k++ {
		out = append(out, edges[n-1]+float64(k)*high)
	}
	return out, most
}

// evenRows are the rows that all mirrors of these elements light whole.
func (r *reduction) evenRows(first, last int) []bool {
	const whole = 0.995 // of what a row within the slit gets
	lit := r.lit()
	rows := make([]bool, r.camera.Rows)
	for y := range rows {
		use := r.usage.row(y)
		rows[y] = true
		for j := first; j <= last; j++ {
			if use[j] != 0 || !(lit[y*r.seq.N()+j] >= whole) {
				rows[y] = false
			}
		}
	}
	return rows
}

// starModel is what the profile expects of the star in voxels. Beyond the ends of its
// table, and of the extinction's, their last values serve: the model only tells where the
// band ends.
func (r *reduction) starModel(edges []float64, seen skyflux.Exposures) []float64 {
	table := r.onSky.table
	model := skyflux.Prior(r.seq.Profile, edges)
	air := seen.Transmission(r.seq.Profile.Site.Extinction.Curve(), edges)
	holdEnds(air)
	for l := range model {
		flux := table.Mean(edges[l], edges[l+1])
		if flux != flux {
			flux = table.Flux[0]
			if edges[l] > table.VacuumNm[0] {
				flux = table.Flux[len(table.Flux)-1]
			}
		}
		model[l] *= flux * air[l] * (edges[l+1] - edges[l]) * seen.Seconds
	}
	return model
}

// holdEnds gives unknown values at both ends that of the nearest known one.
func holdEnds(x []float64) {
	known := func(v float64) bool { return v == v }
	first := slices.IndexFunc(x, known)
	if first < 0 {
		return
	}
	for i := range first {
		x[i] = x[first]
	}
	for i := first + 1; i < len(x); i++ {
		if x[i] != x[i] {
			x[i] = x[i-1]
		}
	}
}

// starRow takes trace rows of an exposure to voxels for a place on the elements, which
// refraction moves by so many elements at each edge.
func (r *reduction) starRow(e *calib.Exposure, edges, drift []float64) func(y int, place float64, signal, variance []float32, flags []calib.Flag) {
	k, g := r.rectifier, r.rectifier.geometry
	signals, variances := make([][]float32, r.camera.Rows), make([][]float32, r.camera.Rows)
	bits := make([][]calib.Flag, r.camera.Rows)
	for y := range signals {
		from, to := y*e.Columns, (y+1)*e.Columns
		signals[y], variances[y], bits[y] = e.Signal[from:to], e.Variance[from:to], e.Flags[from:to]
	}
	// Rows that were straightened are kept: they are asked for at many places.
	type straight struct {
		signal, variance []float32
		flags            calib.RowFlags
	}
	kept := make([]*straight, r.camera.Rows)
	x := make([]float64, len(edges))
	return func(y int, place float64, signal, variance []float32, flags []calib.Flag) {
		row := kept[y]
		if row == nil {
			row = &straight{signal: make([]float32, e.Columns), variance: make([]float32, e.Columns)}
			k.shift.Signal(row.signal, signals, 0, y)
			k.shift.Variance(row.variance, variances, 0, y)
			k.shift.Flags(&row.flags, bits, 0, y)
			kept[y] = row
		}
		for i, nm := range edges {
			x[i] = g.X(place+drift[i], float64(y), nm)
		}
		k.columns.Resample(calib.Voxels{Signal: signal, Variance: variance, Flags: flags, Stride: 1}, row.signal, row.variance, &row.flags, x)
	}
}

// besideOpen has the response hold the light that open neighbours lend each other, of
// which the cube is free: in a wide element all are open.
func (r *reduction) besideOpen(w *skyflux.Wide) {
	term := r.optics.neighbour
	if term == nil || term.Significance(r.optics.geometry.L_c) < neighbourSigmas {
		return
	}
	lent := make([]float64, len(w.Edges)-1-2*w.Beyond)
	for l := range lent {
		lent[l], _ = term.At((w.Edges[w.Beyond+l] + w.Edges[w.Beyond+l+1]) / 2)
	}
	alone := w.Response
	w.Response = func(element, y, voxel int) float64 { return alone(element, y, voxel) * (1 + max(0, lent[voxel])) }
}

// fwhmSigmas is 2 sqrt(2 ln 2): the full width of a Gaussian at half its maximum.
const fwhmSigmas = 2.3548200450309493
