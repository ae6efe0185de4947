package nightsheet

import (
	"fmt"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

// Gains nearer to 1 are none: forecasts are right within 5 %.
const noGain = 1.05

// verdict says whether multiplexing pays, with what and how much: by the forecast, or, without
// one, where it would.
func verdict(r *plan.Summary) string {
	if r.Trade == nil || r.Forecast == nil {
		return blindVerdict(r)
	}
	row := planned(r.Trade)
	if row == nil {
		return blindVerdict(r)
	}
	text := ""
	switch {
	case row.IsSlit():
		text = slitVerdict(r.Trade, row)
	case row.Breaks != "":
		text = fmt.Sprintf("This plan, %s, is not within its limits: %s", trade.Name(row.Candidate), row.Why)
	case row.OverSlit == 0:
		text = fmt.Sprintf("Multiplexing with %s is planned; no slit scan of the same elements is within the limits", trade.Name(row.Candidate))
	case row.OverSlit >= noGain:
		text = fmt.Sprintf("Multiplexing pays: %s gives %.2f times the S/N of %s that a slit scan gives in the same time", trade.Name(row.Candidate), row.OverSlit, aim(r.Trade))
	case row.OverSlit > 1/noGain:
		text = fmt.Sprintf("Multiplexing makes no difference: %s gives %.2f times the S/N of %s that a slit scan gives in the same time", trade.Name(row.Candidate), row.OverSlit, aim(r.Trade))
	default:
		text = fmt.Sprintf("Multiplexing does not pay here: %s gives only %.2f times the S/N of %s that a slit scan gives in the same time", trade.Name(row.Candidate), row.OverSlit, aim(r.Trade))
	}
	return text + better(r.Trade, row) + "."
}

// planned is the row that is chosen, or the given one; nil for neither.
func planned(t *trade.Trade) *trade.Row {
	for i := range t.Rows {
		if t.Rows[i].Chosen {
			return &t.Rows[i]
		}
	}
	return t.Own()
}

// slitVerdict is about a plan that is a slit scan.
func slitVerdict(t *trade.Trade, row *trade.Row) string {
	for i := range t.Rows {
		r := &t.Rows[i]
		if r.IsSlit() || r.Breaks != "" || r.Candidate.ElementMirrors != row.Candidate.ElementMirrors || row.Figure == 0 {
			continue
		}
		ratio := r.Figure / row.Figure
		if ratio >= noGain {
			return fmt.Sprintf("Multiplexing would pay: %s gives %.2f times the S/N of %s that this slit scan gives in the same time", trade.Name(r.Candidate), ratio, aim(t))
		}
		return fmt.Sprintf("Multiplexing does not pay here: the best code, %s, gives %.2f times the S/N of %s that this slit scan gives in the same time", trade.Name(r.Candidate), ratio, aim(t))
	}
	return "Multiplexing is not possible here: no code is within the limits, and this is a slit scan"
}

// better names what would be, where it is not what is planned.
func better(t *trade.Trade, row *trade.Row) string {
	best := t.Best()
	if best == nil || best == row || best.Chosen || row.Figure <= 0 || row.IsSlit() || best.Figure < noGain*row.Figure {
		return ""
	}
	return fmt.Sprintf("; better by %.2f is %s", best.Figure/row.Figure, trade.Name(best.Candidate))
}

// blindVerdict is what can be said without a forecast.
func blindVerdict(r *plan.Summary) string {
	c := trade.Name(forecast.Candidate{Family: r.Code.Family, V: r.Code.V, N: r.Code.Elements})
	switch {
	case r.Code.Family == string(hadamard.SlitScan):
		return "Nothing is multiplexed: this is " + c + "; whether a code would do better nobody can say without a forecast of what is wanted."
	case r.PhotonThreshold > 0:
		return fmt.Sprintf("Whether multiplexing pays nobody can say without a forecast of what is wanted: against a slit scan in the same time, %s gives %.2f times the S/N where read noise rules, and more only for elements brighter than %.2f times the mean where photon noise rules.", c, r.ReadNoiseGain, r.PhotonThreshold)
	}
	return fmt.Sprintf("Whether multiplexing pays nobody can say without a forecast of what is wanted: against a slit scan in the same time, %s gives %.2f times the S/N where read noise rules, and less where photon noise rules.", c, r.ReadNoiseGain)
}

// aim is what the comparison is about.
func aim(t *trade.Trade) string {
	switch t.Aim {
	case sequence.AimFaintest:
		return "the faintest wanted"
	case sequence.AimMean:
		return "all wanted, in the mean,"
	}
	return t.Aim
}
