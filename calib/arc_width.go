package calib

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// LineWidth is a smooth FWHM against wavelength: a parabola, px over nm.
type LineWidth struct {
	// FWHM = Coef[0] + Coef[1] u + Coef[2] u^2, u = (L - CenterNM)/HalfNM within -1 to 1.
	CenterNM, HalfNM float64
	Coef             [3]float64
	// RMSPx is the scatter of the measured widths around it; NaN where none was.
	RMSPx float64
}

// FWHMPx is the width of a line, px: that of the spot and the element together,
// without the pixel's own and without the slit's tilt within a block of rows. Beyond
// the outermost lines it stays what it is there.
func (w LineWidth) FWHMPx(vacuumNM float64) float64 {
	u := min(max((vacuumNM-w.CenterNM)/w.HalfNM, -1), 1)
	return w.Coef[0] + u*(w.Coef[1]+u*w.Coef[2])
}

// fitWidth fits the widths of the lines kept, by least squares repeated with the
// biweight. Its degree is at most the number of lines' less 2.
func fitWidth(r *ArcSolution) LineWidth {
	w := LineWidth{CenterNM: (r.FirstNM + r.LastNM) / 2, HalfNM: max((r.LastNM-r.FirstNM)/2, 1e-3), RMSPx: math.NaN()}
	terms := min(3, max(1, r.Lines-1))
	scale := math.Inf(1)
	for range 6 {
		normal, right := mat.NewSymDense(terms, nil), mat.NewVecDense(terms, nil)
		var misses []float32
		for i := range r.Residuals {
			d := &r.Residuals[i]
			if !d.Kept {
				continue
			}
			width, u := r.unslanted(d), (d.VacuumNM-w.CenterNM)/w.HalfNM
			miss := width - w.FWHMPx(d.VacuumNM)
			misses = append(misses, float32(math.Abs(miss)))
			weight := biweight(miss, scale) / (d.FWHMErr*d.FWHMErr + 1e-4)
			powers := [3]float64{1, u, u * u}
			for a := range terms {
				right.SetVec(a, right.AtVec(a)+weight*powers[a]*width)
				for b := a; b < terms; b++ {
					normal.SetSym(a, b, normal.At(a, b)+weight*powers[a]*powers[b])
				}
			}
		}
		if len(misses) > 0 && !math.IsInf(scale, 0) {
			w.RMSPx = madPerSigma * median(misses)
		}
		var chol mat.Cholesky
		solved := mat.NewVecDense(terms, nil)
		if !chol.Factorize(normal) || chol.SolveVecTo(solved, right) != nil {
			return w
		}
		for a := range terms {
			w.Coef[a] = solved.AtVec(a)
		}
		scale = r.widthScatter(w)
	}
	return w
}

// unslanted frees a measured width of the slit's lean within its block of n rows: a
// box n-1 rows long, of variance (n^2-1)/12 times the lean's square.
func (r *ArcSolution) unslanted(d *ArcResidual) float64 {
	g := &r.Geometry
	n := float64(d.LastRow - d.FirstRow + 1)
	lean := g.SlitTilt + 2*g.Smile*(float64(d.FirstRow+d.LastRow)/2-g.Y_c)
	return math.Sqrt(max(0, d.FWHM*d.FWHM-sigmasPerFWHM*sigmasPerFWHM*lean*lean*(n*n-1)/12))
}

func (r *ArcSolution) widthScatter(w LineWidth) float64 {
	var misses []float32
	for i := range r.Residuals {
		if d := &r.Residuals[i]; d.Kept {
			misses = append(misses, float32(math.Abs(r.unslanted(d)-w.FWHMPx(d.VacuumNM))))
		}
	}
	if len(misses) == 0 {
		return math.Inf(1)
	}
	return max(0.005, madPerSigma*median(misses))
}
