package hadamard

import "math"

// Design is a code's parameters: v steps, k ones a row, l ones shared by two
// rows, with k(k-1) = l(v-1). Its methods are the closed forms of the S/N
// theory, W'W = (k-l)I + lJ being all they need.
//
// Sources: Harwit and Sloane 1979, Hadamard Transform Optics (S-matrices);
// Riesenberg 2003, Proc. SPIE, 16 May 2003 (gain (v+1)/(2 sqrt v)); Ratner,
// Schechner and Goldberg 2007, Opt. Express 15, 17072 (any (v,k,l));
// Wuttig 2005, Appl. Opt. 44, 2710 (the limit that photon noise sets). What no
// paper gives is derived in the comment and checked by Monte Carlo.
type Design struct{ V, K, L int }

// IsS tells whether the code is an S-matrix (k = 2l), whose inverse has entries
// of one magnitude.
func (d Design) IsS() bool { return d.K == 2*d.L }

// InverseEntries gives A's entries: open = 1/k and closed = -l/(k(k-l)).
func (d Design) InverseEntries() (open, closed float64) {
	k := float64(d.K)
	if d.L == 0 {
		return 1 / k, 0 // not -0
	}
	return 1 / k, -float64(d.L) / (k * float64(d.K-d.L))
}

// ReadNoiseVariance is the variance of a decoded element for readings of unit
// variance that does not depend on the signal: k a^2 + (v-k) b^2 =
// (1 - l/k^2)/(k-l); 4v/(v+1)^2 for an S-matrix, 1 for the slit scan.
func (d Design) ReadNoiseVariance() float64 {
	k, l := float64(d.K), float64(d.L)
	return (1 - l/(k*k)) / (k - l)
}

// ReadNoiseGain is the gain in S/N over a slit scan of v elements with as many
// readings, each as long, when the noise is the detector's:
// 1/sqrt(ReadNoiseVariance), (v+1)/(2 sqrt v) for an S-matrix.
func (d Design) ReadNoiseGain() float64 { return 1 / math.Sqrt(d.ReadNoiseVariance()) }

// ReadNoiseGainDark is ReadNoiseGain over a slit scan of the n lit elements
// alone in the same total time: n/v of ReadNoiseGain, because each of the v
// frames is n/v as long as the slit scan's.
func (d Design) ReadNoiseGainDark(n int) float64 {
	return d.ReadNoiseGain() * float64(n) / float64(d.V)
}

// PhotonVariance is the photon noise of a decoded element: element is its
// electrons in one frame when open, total the sum of all elements'. With
// readings y = Wf that are Poisson it is
//
//	b^2 k total + (a^2-b^2) ((k-l) element + l total),
//
// 2 total/(v+1) for an S-matrix, whatever the element.
func (d Design) PhotonVariance(element, total float64) float64 {
	a, b := d.InverseEntries()
	k, l := float64(d.K), float64(d.L)
	if d.IsS() {
		return b * b * k * total
	}
	return b*b*k*total + (a*a-b*b)*((k-l)*element+l*total)
}

// Exposure is one element of a scene as the S/N theory sees it, at one
// detector pixel, in electrons per frame of the code.
type Exposure struct {
	Element      float64 // the element's own, when open
	Total        float64 // the sum of all elements'
	Pedestal     float64 // what reaches the pixel whatever the mask: dark current, glow
	ReadVariance float64 // read noise squared plus gain^2/12, a frame
}

// Variance is the variance of the decoded element: photon noise, and read
// noise and pedestal, which every frame has alike.
func (d Design) Variance(e Exposure) float64 {
	return d.PhotonVariance(e.Element, e.Total) + d.ReadNoiseVariance()*(e.ReadVariance+e.Pedestal)
}

// SNR is the signal-to-noise ratio of the decoded element.
func (d Design) SNR(e Exposure) float64 { return e.Element / math.Sqrt(d.Variance(e)) }

// Gain is SNR over that of a slit scan of the n lit elements in the same total
// time. The slit scan's frames are v/n as long, so
//
//	gain = (n/v) sqrt((R^2 + (element + pedestal) v/n) / Variance).
//
// In the read-noise limit it is ReadNoiseGainDark(n); in the photon limit of an
// S-matrix sqrt(n/v) sqrt(element (v+1)/(2 total)).
func (d Design) Gain(e Exposure, n int) float64 {
	longer := float64(d.V) / float64(n)
	slit := e.ReadVariance + (e.Element+e.Pedestal)*longer
	return math.Sqrt(slit/d.Variance(e)) / longer
}

// PhotonThreshold is the brightness, in units of the mean of the lit elements,
// above which an element gains over the slit scan in equal time when photon
// noise is all. It solves PhotonVariance(f, F) = f n/v for f = threshold F/n,
// and the number n of lit elements drops out for an S-matrix: 2v/(v+1), twice
// the mean. It is +Inf when no brightness gains.
func (d Design) PhotonThreshold(n int) float64 {
	perTotal := d.PhotonVariance(0, 1)
	perElement := d.PhotonVariance(1, 0)
	lit := float64(n)
	margin := lit/float64(d.V) - perElement
	if margin <= 0 {
		return math.Inf(1)
	}
	return lit * perTotal / margin
}

// BreakEvenReadVariance is the read variance, in units of the electrons of one
// element in one frame, above which the code gains over a slit scan of v
// elements on a flat scene: (photon-1)/(1-read), (v+1)/(v-1) for an S-matrix.
// It is +Inf for a code that never gains.
func (d Design) BreakEvenReadVariance() float64 {
	read := d.ReadNoiseVariance()
	if read >= 1 {
		return math.Inf(1)
	}
	return (d.PhotonVariance(1, float64(d.V)) - 1) / (1 - read)
}

// ThroughputNoise is the rms error that independent relative throughput errors
// of rms perFrame leave in the decoded elements, as an rms over the elements
// (the same for each with an S-matrix); sumSquares is the sum of the elements'
// squares. The readings' squares sum to (k-l) sumSquares + l total^2, so it is
//
//	perFrame sqrt(ReadNoiseVariance/v ((k-l) sumSquares + l total^2)),
//
// for an S-matrix perFrame sqrt((total^2 + sumSquares)/(v+1)): total/sqrt v
// in units of perFrame for many elements alike, sqrt 2 times that for one alone.
func (d Design) ThroughputNoise(perFrame, total, sumSquares float64) float64 {
	squares := float64(d.K-d.L)*sumSquares + float64(d.L)*total*total
	return perFrame * math.Sqrt(d.ReadNoiseVariance()/float64(d.V)*squares)
}

// RemoveLeak replaces decoded by what it is without the leak of the closed
// mirrors: with y = Wf + leak (J-W)f and decoded = Ay,
//
//	F = sum(decoded)/((1-leak) + leak v/k),  f = (decoded - leak F/k)/(1-leak).
//
// decoded holds all v columns, dark ones too; leak is below 1.
func (d Design) RemoveLeak(decoded []float64, leak float64) {
	sum := 0.0
	for _, x := range decoded {
		sum += x
	}
	k := float64(d.K)
	total := sum / ((1 - leak) + leak*float64(d.V)/k)
	for j := range decoded {
		decoded[j] = (decoded[j] - leak*total/k) / (1 - leak)
	}
}
