package view

import (
	"bytes"
	"context"
	"math"
	"net/http"

	"mirrorloom/pipeline/extract"
)

// spectrumAnswer is /api/spectrum: extract's numbers.
type spectrumAnswer struct {
	Aperture       string  `json:"aperture"`
	Element        float64 `json:"element"`
	Row            float64 `json:"row"`
	RADeg          float64 `json:"ra_deg"`
	DecDeg         float64 `json:"dec_deg"`
	AreaVoxels     float64 `json:"area_voxels"`
	BackgroundArea float64 `json:"background_voxels"`
	Cells          int     `json:"cells"`
	Unit           string  `json:"unit"`
	WavelengthNM   numbers `json:"wavelength_nm"`
	Signal         numbers `json:"signal"`
	Error          numbers `json:"error"`
	Naive          numbers `json:"naive"`
	Coverage       numbers `json:"coverage"`
	Flags          []int16 `json:"flags"`
	// Correlation is that of each channel with the next.
	Correlation numbers `json:"correlation"`
}

// spectrum computes what o asks for.
func (v *Viewer) spectrum(ctx context.Context, o extract.SpectrumOptions) (s *extract.Spectrum, err error) {
	if err := fits(v.plain, o, mostElements, mostCells); err != nil {
		return nil, badQuery{err}
	}
	err = v.compute(ctx, func() (err error) {
		s, err = v.cube().Spectrum(ctx, o)
		return err
	})
	return s, err
}

// asked reads and computes a query that asks for an aperture alone.
func (v *Viewer) asked(r *http.Request, q *query) (o extract.SpectrumOptions, s *extract.Spectrum, err error) {
	o = q.aperture()
	if err := q.done(); err != nil {
		return o, nil, badQuery{err}
	}
	s, err = v.spectrum(r.Context(), o)
	return o, s, err
}

func (v *Viewer) getSpectrum(w http.ResponseWriter, r *http.Request, q *query) error {
	o, s, err := v.asked(r, q)
	if err != nil {
		return err
	}
	return reply(w, spectrumAnswer{
		Aperture: o.Aperture.Text, Element: s.Element, Row: s.Row, RADeg: s.Position.RADeg, DecDeg: s.Position.DecDeg,
		AreaVoxels: s.Area, BackgroundArea: s.BackgroundArea, Cells: s.Cells, Unit: v.unit,
		WavelengthNM: s.WavelengthNM, Signal: s.Signal, Error: s.Error, Naive: s.Naive, Coverage: s.Coverage,
		Flags: s.Flags, Correlation: correlation(s.Covariance),
	})
}

// correlation of each channel with the next, from covariances [channel][lag].
func correlation(covariance [][]float64) numbers {
	all := make(numbers, len(covariance))
	for l := range all {
		all[l] = math.NaN()
		if l+1 < len(covariance) && covariance[l][0] > 0 && covariance[l+1][0] > 0 {
			all[l] = covariance[l][1] / math.Sqrt(covariance[l][0]*covariance[l+1][0])
		}
	}
	return all
}

// getSpectrumCSV answers extract's spectrum.csv.
func (v *Viewer) getSpectrumCSV(w http.ResponseWriter, r *http.Request, q *query) error {
	_, s, err := v.asked(r, q)
	if err != nil {
		return err
	}
	var text bytes.Buffer
	if err := s.WriteCSV(&text, v.unit); err != nil {
		return err
	}
	w.Header().Set("Content-Type", "text/csv; charset=utf-8")
	w.Header().Set("Content-Disposition", `attachment; filename="spectrum.csv"`)
	_, _ = w.Write(text.Bytes()) // a reader that has gone away is no error of ours
	return nil
}

// mostLines are fitted at a time.
const mostLines = 8

// getLine answers extract's fit of lines, and its sum over a band, in an aperture:
//
//	rest_nm=A,B,...   vacuum nm at rest
//	window_nm, velocity_km_s, range_km_s, min_sn, free=1   as extract's options
//	from, to          channels of a band to add up
//	continuum=A-B,C-D vacuum nm, side bands of that band
func (v *Viewer) getLine(w http.ResponseWriter, r *http.Request, q *query) error {
	o := q.aperture()
	g := v.schema.Grid
	if q.has("rest_nm") {
		o.Lines = &extract.LineOptions{RestNM: q.numbers("rest_nm", mostLines)}
	}
	q.known = append(q.known, "rest_nm")
	fit := extract.LineOptions{
		WindowNM: q.numberOr("window_nm", 0), VelocityKmS: q.numberOr("velocity_km_s", 0),
		RangeKmS: q.numberOr("range_km_s", extract.DefaultRangeKmS), MinSN: q.numberOr("min_sn", extract.DefaultMinSN), Free: q.yes("free"),
	}
	if o.Lines != nil {
		fit.RestNM = o.Lines.RestNM
		o.Lines = &fit
	}
	if q.has("from") || q.has("to") {
		from, to := q.band(g.Count)
		b := extract.Band{FromNM: g.WavelengthNM(float64(from) - 0.5), ToNM: g.WavelengthNM(float64(to) + 0.5)}
		if text := q.text("continuum"); text != "" {
			var err error
			if b.Sides, err = extract.ParseSides(text); err != nil {
				q.fail("%v", err)
			}
		}
		o.Bands = append(o.Bands, b)
	}
	q.known = append(q.known, "from", "to", "continuum")
	if o.Lines == nil && o.Bands == nil {
		q.fail("give rest_nm for lines, or from and to for a band")
	}
	if err := q.done(); err != nil {
		return badQuery{err}
	}
	s, err := v.spectrum(r.Context(), o)
	if err != nil {
		return err
	}
	return reply(w, s.Answer(o, v.unit))
}
