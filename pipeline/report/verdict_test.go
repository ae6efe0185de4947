package report

import (
	"fmt"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
)

func at(x float64) *float64 { return &x }

// cleanRun is a night on which all went well; nightLedger has its frames.
func cleanRun() *product.Run {
	hits := 0
	return &product.Run{
		Quality: product.Quality{
			GoodFraction: 0.85, CoveredGoodFraction: 0.993, DarkChi2Heldout: at(1.01), Hits: &hits, WavelengthRMSPx: at(0.005),
			ErrorScale: &product.ErrorScale{Mean: 1.002, Max: 1.5, Applied: 0.003},
			Flags:      []product.FlagCount{{Name: "BADPIXEL", Bit: product.FlagBadPixel, Voxels: 70, Share: 0.007}},
		},
		Calibration: &product.Calibration{Arcs: &product.Arcs{RMSPx: 0.005, WorstErrorPx: 0.003}, Flat: &product.Flat{}},
		Throughput:  &product.Throughput{State: product.ThroughputSteady},
		Audit:       &pair.Audit{Cycles: []pair.AuditCycle{{Cycle: 1, Chi2: 1, Sure: true}}},
	}
}

func nightLedger(steps int, lacking ...int) product.Ledger {
	var l product.Ledger
	for step := 1; step <= steps; step++ {
		e := product.NewEntry(step)
		e.Kind, e.Verdict = "science", product.OK
		for _, s := range lacking {
			if s == step {
				e.Verdict = product.Missing
			}
		}
		l = append(l, e)
	}
	bias := product.NewEntry(steps + 1)
	bias.Kind, bias.Verdict = "bias", product.Missing
	return append(l, bias)
}

func flagged(r *product.Run, name string, bit int16, share float64) {
	r.Quality.Flags = append(r.Quality.Flags, product.FlagCount{Name: name, Bit: bit, Voxels: 1, Share: share})
	if bit&product.FlagBad != 0 {
		r.Quality.CoveredGoodFraction = max(0, r.Quality.CoveredGoodFraction-share)
	}
}

// Figures as nights of these kinds give them (rehearsed ones, and those that the design
// measured); what is to be answered is common sense.
func TestJudge(t *testing.T) {
	for _, c := range []struct {
		name  string
		make  func(r *product.Run)
		lost  []int
		trust Trust
		says  string // in a reason
		do    string // in what to do
	}{
		{"clean", func(*product.Run) {}, nil, TrustYes, "All 40 frames are there.", "Use it as it is"},
		{"drift found and corrected", func(r *product.Run) {
			r.Throughput.State = product.ThroughputCorrected
			r.Quality.ThroughputRMS, r.Quality.ThroughputErr = at(0.0498), at(0.0021)
		}, nil, TrustYes, "varied by 4.98 %; that was measured and corrected, with an error of 0.21 %", "Use it as it is"},
		{"drift that the scene cannot measure", func(r *product.Run) {
			r.Throughput.State, r.Quality.DarkChi2Heldout, r.Exit = product.ThroughputUncertain, at(1.03), 0
		}, nil, TrustLook, "cannot tell how the throughput varied", "sentinel rows"},
		{"drift that nothing explains", func(r *product.Run) { r.Throughput.State = product.ThroughputUnexplained }, nil, TrustLook, "no correction", "brightest sources"},
		{"lost frames restored", func(r *product.Run) {
			r.Quality.Lost, r.Quality.RestoredGrowth = 3, at(1.06)
			flagged(r, "RESTORED", product.FlagRestored, 1)
		}, []int{3, 7, 8}, TrustYes, "3 frames were lost and restored from the dark columns; that makes the noise 6 % larger", "Use it as it is"},
		{"one lost frame restored", func(r *product.Run) { r.Quality.Lost, r.Quality.RestoredGrowth = 1, at(1.01) }, []int{3}, TrustYes, "1 frame was lost", ""},
		{"many lost frames restored", func(r *product.Run) {
			r.Quality.Lost, r.Quality.RestoredGrowth, r.Exit = 12, at(2.3), 3
		}, []int{1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12}, TrustLook, "noise 130 % larger", "Take the missing steps again"},
		{"heavily lost", func(r *product.Run) {
			r.Quality.Lost, r.Exit, r.Quality.DarkChi2Heldout, r.Quality.ErrorScale = 20, 3, nil, nil
			flagged(r, "LOST", product.FlagLost, 1)
		}, []int{1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15, 16, 17, 18, 19, 20}, TrustNo, "20 of 40 frames are missing or show no mask of this sequence", "Take the missing steps again"},
		{"no flats", func(r *product.Run) {
			r.Calibration.Flat, r.Exit = nil, 3
			flagged(r, "LOWFLAT", product.FlagLowFlat, 1)
		}, nil, TrustNo, "how bright places are against each other", "Take the lamp flats"},
		{"a part of the flat too low", func(r *product.Run) { flagged(r, "LOWFLAT", product.FlagLowFlat, 0.1) }, nil, TrustLook, "10.00 % of the voxels", "map of voxels"},
		{"wavelengths of the profile", func(r *product.Run) {
			r.Calibration.Arcs, r.Quality.WavelengthRMSPx, r.Exit = nil, nil, 3
			flagged(r, "NOMINALWAVE", product.FlagNominalWave, 1)
		}, nil, TrustNo, "Wavelengths were not measured", "take them again"},
		{"no arcs asked for", func(r *product.Run) { r.Calibration.Arcs, r.Quality.WavelengthRMSPx = nil, nil }, nil, TrustLook, "as the recipe asks", "Compare lines"},
		{"wavelengths uncertain", func(r *product.Run) { r.Calibration.Arcs.WorstErrorPx = 0.3 }, nil, TrustLook, "uncertain by 0.3 pixels", "residuals"},
		{"seeing and guiding", func(r *product.Run) {
			r.Quality.DarkChi2Heldout = at(2.4)
			r.Quality.ErrorScale = &product.ErrorScale{Mean: 2.4, Max: 256, Applied: 0.043}
		}, nil, TrustLook, "In 4.30 % of the pixels something changed from frame to frame (seeing, guiding, flexure", "map of the error scale"},
		{"all masks flipped", func(r *product.Run) { // found by the arcs
			r.Calibration.Arcs, r.Quality.WavelengthRMSPx, r.Exit = nil, nil, 3
			r.Warnings = []string{"wavelengths are the profile's, flagged NOMINALWAVE: the arcs show every mask flipped along the dispersion"}
			flagged(r, "NOMINALWAVE", product.FlagNominalWave, 1)
		}, nil, TrustNo, "Wavelengths were not measured", ""},
		{"all masks inverted", func(r *product.Run) {
			r.Audit, r.Exit = &pair.Audit{Cycles: []pair.AuditCycle{{Cycle: 1, AllInverted: true, Chi2: 0.99, Sure: true}}}, 3
		}, nil, TrustNo, "Every mask of the night was inverted", "take the night again"},
		{"frames in another order", func(r *product.Run) {
			r.Audit = &pair.Audit{Cycles: []pair.AuditCycle{{Cycle: 1, Whole: "in the order of time", Chi2: 1, Sure: true}}}
		}, nil, TrustYes, "the frames are in the order of time", ""},
		{"frames that show another mask", func(r *product.Run) {
			r.Audit = &pair.Audit{Cycles: []pair.AuditCycle{{Findings: []pair.AuditFinding{{Repaired: true}, {Repaired: true}, {}, {Harmless: true}}}}}
		}, nil, TrustYes, "3 frames show another mask than their label says: 2 served the step shown, 1 could not be used.", ""},
		{"cosmic storm", func(r *product.Run) {
			*r.Quality.Hits, r.Quality.DoubtfulPixels, r.Quality.CoveredGoodFraction = 21034, 412, 0.91
		}, nil, TrustLook, "9.00 % of the voxels are flagged as not good", "map of voxels"},
		{"cosmic rays as ever", func(r *product.Run) { *r.Quality.Hits = 950 }, nil, TrustYes, "", ""},
		{"saturated star", func(r *product.Run) {
			r.Quality.Saturated, r.Exit = 61, 3
			flagged(r, "SATURATED", product.FlagSaturated, 0.002)
		}, nil, TrustLook, "0.20 % of the voxels are flagged SATURATED", "shorten the dwell"},
		{"saturated samples restored", func(r *product.Run) { r.Quality.Saturated = 4 }, nil, TrustYes, "", ""},
		{"ruined: the frames are of different fields", func(r *product.Run) {
			r.Quality.DarkChi2Heldout, r.Throughput.State = at(283), product.ThroughputUnexplained
			r.Quality.ErrorScale = &product.ErrorScale{Mean: 290, Max: 9000, Applied: 0.97}
		}, nil, TrustNo, "scatter 17 times as much as noise", "take the night again"},
		{"ruined: masks that nobody knows", func(r *product.Run) { // a third of the masks flipped
			r.Audit = &pair.Audit{Cycles: []pair.AuditCycle{{Cycle: 1, Chi2: 8.99, AllInverted: true}}}
			r.Quality.DarkChi2Heldout, r.Throughput.State = at(5.68), product.ThroughputUncertain
			r.Quality.ErrorScale = &product.ErrorScale{Mean: 4.24, Max: 26, Applied: 0.66}
		}, nil, TrustNo, "which frame shows which mask cannot be told", "take the night again"},
		{"an audit that lost frames leave in doubt", func(r *product.Run) { r.Audit.(*pair.Audit).Cycles[0].Sure = false }, nil, TrustYes, "", ""},
		{"ruined, no error scale", func(r *product.Run) { r.Quality.DarkChi2Heldout, r.Quality.ErrorScale = at(283), nil }, nil, TrustNo, "scatter 17 times as much as their errors", "reduce without them"},
		{"errors too small", func(r *product.Run) { r.Quality.DarkChi2Heldout, r.Quality.ErrorScale = at(1.44), nil }, nil, TrustLook, "scatter 1.20 times as much", "Multiply all errors by 1.2 (VARIANCE by 1.4)"},
		{"errors too large", func(r *product.Run) { r.Quality.DarkChi2Heldout = at(0.8) }, nil, TrustLook, "The errors are too large", "gain and read noise"},
		{"no dark columns", func(r *product.Run) {
			r.Quality.DarkChi2Heldout, r.Quality.ErrorScale, r.Audit = nil, nil, nil
			r.Throughput.State = product.ThroughputUnmeasured
		}, nil, TrustLook, "Nothing checks the errors", "Plan dark columns"},
		{"most voxels bad", func(r *product.Run) { r.Quality.CoveredGoodFraction = 0.2 }, nil, TrustNo, "Only 20.00 %", "which flags"},
		{"something asked for is lacking", func(r *product.Run) {
			r.Exit, r.Warnings = 3, []string{"the sky was not subtracted: no place is blank"}
		}, nil, TrustLook, "The sky was not subtracted: no place is blank.", "listed below"},
		{"element cube alone", func(r *product.Run) {
			r.Quality.GoodFraction, r.Quality.CoveredGoodFraction, r.Quality.Flags = 0, 0, nil
		}, nil, TrustYes, "All 40 frames", ""},
		{"combined", func(r *product.Run) {
			*r = product.Run{Combined: product.Members{{Path: "a"}, {Path: "b"}}, Quality: product.Quality{GoodFraction: 0.8, DarkChi2Heldout: at(1)}}
		}, nil, TrustYes, "", ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			run := cleanRun()
			c.make(run)
			v := Judge(run, nightLedger(40, c.lost...))
			require.Equal(t, c.trust, v.Trust, "%+v", v.Checks)
			require.Contains(t, strings.Join(v.Reasons, "\n"), c.says)
			require.Contains(t, strings.Join(v.Do, "\n"), c.do)
			require.NotEmpty(t, v.Do)
			require.NotEmpty(t, v.Reasons)
			require.LessOrEqual(t, len(v.Reasons), 3)
			for _, s := range v.Reasons {
				require.LessOrEqual(t, len(strings.Fields(s)), 46, s)
				require.Equal(t, sentence(s), s)
			}
			for _, k := range v.Checks {
				require.NotEmpty(t, k.Figure, k.Name)
				require.False(t, k.Level != TrustYes && k.Says == "" && k.Name != "Whole" && k.Name != "Good voxels", k.Name)
			}
		})
	}
}

// A run that was read from run.json has its audit as plain JSON.
func TestAuditOfJSON(t *testing.T) {
	r := cleanRun()
	r.Audit = map[string]any{"cycles": []any{map[string]any{"cycle": 1, "all_inverted": true}}}
	require.Equal(t, TrustNo, Judge(r, nightLedger(40)).Trust)
	r.Audit = "of another version"
	require.Nil(t, auditOf(r))
	r.Audit = nil
	require.Equal(t, TrustYes, Judge(r, nightLedger(40)).Trust)
}

func TestExitSentence(t *testing.T) {
	in := Input{Run: &product.Run{Exit: 3, Warnings: []string{"two frames drift", "all is odd"}}, Degraded: []string{"two frames drift", "an arc is missing"}}
	require.Equal(t, "Exit code 3: the product was written, but it is not whole.", exitSentence(in))
	require.Equal(t, []string{"Two frames drift.", "An arc is missing.", "All is odd."}, viewVerdict(in).Look)
	require.Equal(t, "Exit code 1.", exitSentence(Input{Run: &product.Run{Exit: 1}}))
	require.Equal(t, "Exit code 0: nothing is missing.", exitSentence(Input{Run: &product.Run{}}))
}

func TestFramesSentence(t *testing.T) {
	for _, c := range []struct {
		lacking []int
		want    string
	}{
		{nil, "All 40 science steps have their frame."},
		{[]int{7}, "39 of 40 science steps have their frame; lacking is step 7."},
		{[]int{1, 3, 4, 5, 40}, "35 of 40 science steps have their frame; lacking are the steps 1, 3 to 5, 40."},
	} {
		require.Equal(t, c.want, framesSentence(nightLedger(40, c.lacking...)), fmt.Sprint(c.lacking))
	}
	var odd []int
	for s := 1; s < 40; s += 2 {
		odd = append(odd, s)
	}
	require.True(t, strings.HasSuffix(framesSentence(nightLedger(40, odd...)), "21, 23, and more."))
}

func TestSentence(t *testing.T) {
	for in, want := range map[string]string{"": "", "a": "A.", "3 frames": "3 frames.", "Done!": "Done!", "ärger": "Ärger.", " why? ": "Why?"} {
		require.Equal(t, want, sentence(in))
	}
}
