package view

import (
	"math"
	"net/http"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/report"
)

// runAnswer is /api/run.
type runAnswer struct {
	Name     string `json:"name"`
	Object   string `json:"object"`
	Verdict  string `json:"verdict"`
	CanTrust string `json:"can_trust"`
	// Reasons are what is known for and against it, Do what to do about it.
	Reasons  []string `json:"reasons"`
	Do       []string `json:"do"`
	Combined bool     `json:"combined"`
	Runs     int      `json:"runs"`

	Unit         string  `json:"unit"`
	Elements     int     `json:"elements"`
	Rows         int     `json:"rows"`
	Voxels       int     `json:"voxels"`
	FirstNM      float64 `json:"first_nm"`
	StepNM       float64 `json:"step_nm"`
	Log          bool    `json:"log"`
	Vacuum       bool    `json:"vacuum"` // of the cube's own axis; wavelengths here are all in vacuum
	Frame        string  `json:"frame"`
	WavelengthNM numbers `json:"wavelength_nm"`
	SkyLinesNM   numbers `json:"sky_lines_nm"`

	WCS           wcsAnswer    `json:"wcs"`
	CenterRA      float64      `json:"center_ra"`
	CenterDec     float64      `json:"center_dec"`
	ArcsecElement float64      `json:"arcsec_element"`
	ArcsecRow     float64      `json:"arcsec_row"`
	NorthDeg      float64      `json:"north_deg"` // position angle of the +row axis
	Parity        int          `json:"parity"`
	Flags         []flagAnswer `json:"flags"`
	Layers        []layer      `json:"layers"`

	CubeSHA  string `json:"cube_sha256"`
	Settings struct {
		Recipe   string `json:"recipe_sha256"`
		Profile  string `json:"profile_sha256"`
		Sequence string `json:"sequence_sha256"`
	} `json:"settings"`
}

// wcsAnswer is the celestial part of the world coordinates: FITS cards, pixels from 1.
type wcsAnswer struct {
	CRPIX [2]float64    `json:"crpix"`
	CRVAL [2]float64    `json:"crval"`
	CD    [2][2]float64 `json:"cd"`
}

type flagAnswer struct {
	Bit  int16  `json:"bit"`
	Name string `json:"name"`
	Bad  bool   `json:"bad"`
}

func (v *Viewer) getRun(w http.ResponseWriter, _ *http.Request, q *query) error {
	if err := q.done(); err != nil {
		return badQuery{err}
	}
	s := v.schema
	a := runAnswer{
		Name: v.name, Object: s.Object, Combined: v.plain.Runs() > 1, Runs: v.plain.Runs(), Unit: v.unit,
		Elements: s.Elements, Rows: s.Rows, Voxels: s.Grid.Count,
		FirstNM: s.Grid.FirstNM, StepNM: s.Grid.StepNM, Log: s.Grid.Spacing == instrument.Logarithmic, Vacuum: s.Grid.Axis == instrument.Vacuum,
		Frame: string(s.Frame.Name), WavelengthNM: v.wavelengths(), SkyLinesNM: v.sky,
		CenterRA: s.RADeg, CenterDec: s.DecDeg, ArcsecElement: 3600 * s.C1Deg, ArcsecRow: 3600 * s.C2Deg,
		NorthDeg: s.RotangDeg, Parity: s.Parity, Layers: layers, CubeSHA: v.plain.SHA,
	}
	var err error
	if a.WCS, err = v.wcs(); err != nil {
		return err
	}
	for _, f := range product.Flags() {
		a.Flags = append(a.Flags, flagAnswer{f.Bit, f.Name, f.Bit&product.FlagBad != 0})
	}
	primary := v.file.HDUs()[0].Header
	for key, to := range map[string]*string{"RECSHA": &a.Settings.Recipe, "PROFSHA": &a.Settings.Profile, "SEQSHA": &a.Settings.Sequence} {
		if text, err := primary.Str(key); err == nil {
			*to = text
		}
	}
	v.judge(&a)
	return reply(w, a)
}

func (v *Viewer) wavelengths() numbers {
	nm := make(numbers, v.schema.Grid.Count)
	for l := range nm {
		nm[l] = v.schema.Grid.WavelengthNM(float64(l))
	}
	return nm
}

func (v *Viewer) wcs() (a wcsAnswer, err error) {
	h := v.images.signal.Header
	for key, to := range map[string]*float64{
		"CRPIX1": &a.CRPIX[0], "CRPIX2": &a.CRPIX[1], "CRVAL1": &a.CRVAL[0], "CRVAL2": &a.CRVAL[1],
		"CD1_1": &a.CD[0][0], "CD1_2": &a.CD[0][1], "CD2_1": &a.CD[1][0], "CD2_2": &a.CD[1][1],
	} {
		if *to, err = h.Float(key); err != nil {
			return a, err
		}
	}
	return a, nil
}

// judge says whether the cube can be trusted, as the report does.
func (v *Viewer) judge(a *runAnswer) {
	a.Reasons, a.Do = []string{}, []string{}
	if v.run == nil {
		a.Verdict, a.CanTrust = "There is no "+product.RunFile+" beside the cube: nothing tells how good it is.", string(report.TrustLook)
		return
	}
	j := report.Judge(v.run, v.ledger)
	a.Verdict, a.CanTrust = j.Headline, string(j.Trust)
	a.Reasons, a.Do = append(a.Reasons, j.Reasons...), append(a.Do, j.Do...)
}

func (v *Viewer) getProgress(w http.ResponseWriter, _ *http.Request, q *query) error {
	if err := q.done(); err != nil {
		return badQuery{err}
	}
	return reply(w, v.folder.progress())
}

func (v *Viewer) getLedger(w http.ResponseWriter, _ *http.Request, q *query) error {
	if err := q.done(); err != nil {
		return badQuery{err}
	}
	if v.ledger == nil {
		return reply(w, product.Ledger{})
	}
	return reply(w, v.ledger)
}

// finiteOr is x, or other where it is not finite.
func finiteOr(x, other float64) float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return other
	}
	return x
}
