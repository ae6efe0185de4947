package nightsheet

import (
	"fmt"
	"math"
)

// Position is a place on the sky and how the field lies there.
type Position struct {
	RADeg  float64 `json:"ra_deg"`
	DecDeg float64 `json:"dec_deg"`
	// RA and Dec are the same in hours, minutes and seconds, and degrees, minutes and seconds
	// (ICRS).
	RA  string `json:"ra_hms"`
	Dec string `json:"dec_dms"`
	// PositionAngleDeg is that of the field's second axis, north through east.
	PositionAngleDeg float64 `json:"position_angle_deg"`
}

// spell fills in RA and Dec: hundredths of a second of time and tenths of an arc second, to
// which telescopes are sent.
func (p *Position) spell() {
	const day = 24 * 3600 * 100
	ra := int64(math.Round(math.Mod(p.RADeg/360+1, 1)*day)) % day
	p.RA = fmt.Sprintf("%02d:%02d:%02d.%02d", ra/360000, ra/6000%60, ra/100%60, ra%100)
	sign, dec := '+', int64(math.Round(math.Abs(p.DecDeg)*36000))
	if p.DecDeg < 0 && dec > 0 {
		sign = '-'
	}
	p.Dec = fmt.Sprintf("%c%02d:%02d:%02d.%d", sign, dec/36000, dec/600%60, dec/10%60, dec%10)
}
