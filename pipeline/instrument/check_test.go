package instrument

import (
	"math"
	"os"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/config"
)

// plain is a profile that names every key once, a key a line where it can, so
// that each can be spoilt by its line. Two amplifiers with overscan between
// their data; all keywords and kinds of its own.
const plain = `name: plain
telescope:
  diameter_m: 2
  obscured_fraction: 0.1
  throughput:
    - {wavelength_nm: 400, fraction: 0.5}
    - {wavelength_nm: 700, fraction: 0.6}
site:
  latitude_deg: 10
  longitude_east_deg: 20
  height_m: 30
dmd:
  columns: 40
  rows: 30
  pitch_um: 13
  mounting: square
  tilt_deg: 12
  arcsec_per_mirror: 0.25
  parity: -1
  contrast:
    - {wavelength_nm: 400, ratio: 3000}
    - {wavelength_nm: 700, ratio: 2000}
  stuck_csv: stuck.csv
spectrograph:
  f_number: 4
  pupil_oversize: 1.2
  center_nm: 500
  dispersion_px_per_nm: [2, 0.001, 0]
  u_step_px: 1
  w_step_px: 1.1
  x_center_px: 49.5
  y_center_px: 19.5
  slit_tilt: 0.01
  smile_per_px: 0.0001
  trace_tilt: 0.02
  trace_curve_per_px: 0.0001
  lsf_fwhm_px: 3
  throughput:
    - {wavelength_nm: 450, fraction: 0}
    - {wavelength_nm: 550, fraction: 1}
detector:
  columns: 100
  rows: 40
  amplifiers:
    - data: [1, 50, 1, 40]
      overscan: [51, 55, 1, 40]
      gain_e_per_adu: 1.5
      read_noise_e: 3
      bias_adu: 1000
    - data: [61, 110, 1, 40]
      overscan: [56, 60, 1, 40]
      gain_e_per_adu: 1.4
      read_noise_e: 4
      bias_adu: 900
  dark_e_per_s: 0
  saturation_adu: 50000
  linearity: [-1.0e-6, 0]
  read_s: 0
  read_mode: {kind: fowler, reads: 8, spacing: 0.01}
keywords:
  step: SEQSTEP
  maskid: PATTERN
  kind: OBSTYPE
  exptime: TEXP
  date_obs: DATE-BEG
  airmass: SECZ
  ra: TELRA
  dec: TELDEC
  rotang: POSANG
  instrume: CAMERA
kinds:
  bias: ZERO
  dark: DARK
  flat: LAMPFLAT
  arc: LAMPARC
  all-on: OPEN
  all-off: SHUT
  science: OBJECT
  refstar: STANDARD
grid:
  first_nm: 490
  step_nm: 0.5
  count: 41
`

const plainStuck = "column,row,state\n0,29,on\n39,0,off\n"

// besideStuck serves the CSV file that plain names.
func besideStuck(text string) func(string) ([]byte, error) {
	return func(name string) ([]byte, error) {
		if name != "stuck.csv" {
			return nil, os.ErrNotExist
		}
		return []byte(text), nil
	}
}

func parsePlain(text string) (*Profile, error) {
	return Parse("p.yaml", []byte(text), besideStuck(plainStuck))
}

// TestWrongProfiles spoils each key once. A row names the line of plain that it
// replaces (several where a section is spoilt) and the whole sentence expected.
func TestWrongProfiles(t *testing.T) {
	_, err := parsePlain(plain)
	require.NoError(t, err)
	spoilt := make(map[string]bool)
	for _, c := range []struct{ old, replacement, want string }{
		{"name: plain", "name: plain name", `p.yaml:1: name: "plain name" is no profile name; write 1 to 32 letters, digits, dots, hyphens or underscores`},
		{"  diameter_m: 2\n", "  diameter_m: 2000\n", "p.yaml:3: telescope.diameter_m: 2000 is outside 0.01 to 100; give a number in this range"},
		{"  obscured_fraction: 0.1", "  obscured_fraction: 1", "p.yaml:4: telescope.obscured_fraction: 1 is not from 0 to below 1; give the shadowed share of the area"},
		{"wavelength_nm: 400, fraction: 0.5}", "wavelength_nm: 700, fraction: 0.5}", "p.yaml:7: telescope.throughput[1].wavelength_nm: 700 does not lie above 700 before it; list the rows in ascending order"},
		{"fraction: 0.6", "fraction: 60", "p.yaml:7: telescope.throughput[1].fraction: 60 is outside 0 to 1; give a number in this range"},
		{"    - {wavelength_nm: 700, fraction: 0.6}\n", "", "p.yaml:5: telescope.throughput: the table has 1 rows; give at least 2"},
		{"  latitude_deg: 10", "  latitude_deg: -90.5", "p.yaml:9: site.latitude_deg: -90.5 is outside -90 to 90; give a number in this range"},
		{"  longitude_east_deg: 20", "  longitude_east_deg: 361", "p.yaml:10: site.longitude_east_deg: 361 is outside -180 to 360; give a number in this range"},
		{"  height_m: 30", "  height_m: 30000", "p.yaml:11: site.height_m: 30000 is outside -500 to 10000; give a number in this range"},
		{"  columns: 40", "  columns: 0", "p.yaml:13: dmd.columns: 0 is outside 1 to 32768; give a whole number in this range"},
		{"  rows: 30", "  rows: 40000", "p.yaml:14: dmd.rows: 40000 is outside 1 to 32768; give a whole number in this range"},
		{"  pitch_um: 13", "  pitch_um: -13", "p.yaml:15: dmd.pitch_um: -13 is not above 0; give a positive number"},
		{"  mounting: square", "  mounting: turned", `p.yaml:16: dmd.mounting: "turned" is unknown; write square or diagonal`},
		{"  tilt_deg: 12", "  tilt_deg: 45", "p.yaml:17: dmd.tilt_deg: 45 is not between 0 and 45; give the mirrors' tilt from flat"},
		{"  tilt_deg: 12", "  tilt_deg: 12\n  incidence_deg: 90", "p.yaml:18: dmd.incidence_deg: 90 is outside -60 to 60; give a number in this range"},
		{"  arcsec_per_mirror: 0.25", "  arcsec_per_mirror: 0", "p.yaml:18: dmd.arcsec_per_mirror: 0 is not above 0; give a positive number"},
		{"  parity: -1", "  parity: 0", "p.yaml:19: dmd.parity: 0 is no parity; write 1 or -1"},
		{"wavelength_nm: 700, ratio: 2000", "wavelength_nm: 300, ratio: 2000", "p.yaml:22: dmd.contrast[1].wavelength_nm: 300 does not lie above 400 before it; list the rows in ascending order"},
		{"ratio: 3000", "ratio: 0.001", "p.yaml:21: dmd.contrast[0].ratio: 0.001 is not above 1; give the light of an on mirror over that of an off mirror"},
		{"  contrast:\n    - {wavelength_nm: 400, ratio: 3000}\n    - {wavelength_nm: 700, ratio: 2000}\n", "  contrast: []\n", "p.yaml:20: dmd.contrast: the table has 0 rows; give at least 1"},
		{"  stuck_csv: stuck.csv", "  stuck_csv: ../stuck.csv", `p.yaml:23: dmd.stuck_csv: "../stuck.csv" is no bare file name; put the file beside the profile and name it without a folder`},
		{"  f_number: 4", "  f_number: 2.3", "p.yaml:25: spectrograph.f_number: the beams of on and off mirrors overlap at f/2.3 with a tilt of 12 degrees; give a slower beam than f/2.352"},
		{"  pupil_oversize: 1.2", "  pupil_oversize: 0.9", "p.yaml:26: spectrograph.pupil_oversize: 0.9 is outside 1 to 10; give a number in this range"},
		{"  center_nm: 500", "  center_nm: 0", "p.yaml:27: spectrograph.center_nm: 0 is not above 0; give a positive number"},
		{"[2, 0.001, 0]", "[2, 0.2, 0]", "p.yaml:28: spectrograph.dispersion_px_per_nm: the dispersion runs from -2.1 to 6.1 px/nm over the grid and must not change its sign; correct the coefficients or the grid"},
		{"[2, 0.001, 0]", "[0, 0, 0]", "p.yaml:28: spectrograph.dispersion_px_per_nm: the dispersion runs from 0 to 0 px/nm over the grid and must not change its sign; correct the coefficients or the grid"},
		// The derivative's vertex, 2 + 3 d3 l^2 at l = 0, lies inside the grid.
		{"[2, 0.001, 0]", "[-1, 0, 0.03]", "p.yaml:28: spectrograph.dispersion_px_per_nm: the dispersion runs from -1 to 8.456 px/nm over the grid and must not change its sign; correct the coefficients or the grid"},
		{"  u_step_px: 1\n", "  u_step_px: -1\n", "p.yaml:29: spectrograph.u_step_px: -1 is not above 0; give a positive number"},
		{"  w_step_px: 1.1", "  w_step_px: 0", "p.yaml:30: spectrograph.w_step_px: 0 is not above 0; give a positive number"},
		{"  x_center_px: 49.5", "  x_center_px: 149.5", "p.yaml:80: grid: its wavelengths fall on columns 129.6 to 169.6 of a detector of 100 for the middle of the field; correct the grid or the spectrograph"},
		{"  x_center_px: 49.5", "  x_center_px: -20.7", "p.yaml:80: grid: its wavelengths fall on columns -40.6 to -0.6 of a detector of 100 for the middle of the field; correct the grid or the spectrograph"},
		{"  y_center_px: 19.5", "  y_center_px: 40", "p.yaml:32: spectrograph.y_center_px: 40 is outside -0.5 to 39.5; give a number in this range"},
		{"  slit_tilt: 0.01", "  slit_tilt: 2", "p.yaml:33: spectrograph.slit_tilt: 2 is outside -1 to 1; give a number in this range"},
		{"  smile_per_px: 0.0001", "  smile_per_px: small", "p.yaml:34: spectrograph.smile_per_px: a number is wanted, not small; write a plain decimal number without unit or quotes"},
		{"  trace_tilt: 0.02", "  trace_tilt: 0.0809", "p.yaml:35: spectrograph.trace_tilt: a spectrum leaves its row by 8.01 rows end to end, more than 8; turn the detector or correct trace_tilt and trace_curve_per_px"},
		{"  trace_curve_per_px: 0.0001", "  trace_curve_per_px: 0.004", "p.yaml:35: spectrograph.trace_tilt: a spectrum leaves its row by 10.8 rows end to end, more than 8; turn the detector or correct trace_tilt and trace_curve_per_px"},
		{"  lsf_fwhm_px: 3", "  lsf_fwhm_px: 2.9", "p.yaml:37: spectrograph.lsf_fwhm_px: 2.9 px is below 3, too few for lines to be resampled well; give a wider line spread or bin less"},
		{"wavelength_nm: 450, fraction: 0}", "wavelength_nm: 0, fraction: 0}", "p.yaml:39: spectrograph.throughput[0].wavelength_nm: 0 is not above 0; give a positive number"},
		{"fraction: 1}", "fraction: -0.1}", "p.yaml:40: spectrograph.throughput[1].fraction: -0.1 is outside 0 to 1; give a number in this range"},
		{"  columns: 100", "  columns: 99", "p.yaml:50: detector.amplifiers[1].data: the section reaches active column 100 and row 40 of a detector of 99 x 40; correct the section or the detector's size"},
		{"  rows: 40", "  rows: 41", "p.yaml:44: detector.amplifiers: the data sections cover 4000 pixels of the 100 x 41 of the detector; give sections that tile it"},
		{"data: [1, 50, 1, 40]", "data: [0, 50, 1, 40]", "p.yaml:45: detector.amplifiers[0].data: [0 50 1 40] is no section x1, x2, y1, y2 of pixels from 1 to 65536; give each first not above its last"},
		{"data: [1, 50, 1, 40]", "data: [1, 50, 1]", "p.yaml:45: detector.amplifiers[0].data: the list has 3 items where 4 are wanted; give exactly 4"},
		{"data: [61, 110, 1, 40]", "data: [50, 110, 1, 40]", "p.yaml:50: detector.amplifiers[1].data: the section shares pixels with detector.amplifiers[0].data; give each raw pixel to one section"},
		{"data: [61, 110, 1, 40]", "data: [62, 110, 1, 40]", "p.yaml:44: detector.amplifiers: the data sections cover 3960 pixels of the 100 x 40 of the detector; give sections that tile it"},
		{"overscan: [51, 55, 1, 40]", "overscan: [50, 55, 1, 40]", "p.yaml:46: detector.amplifiers[0].overscan: the section shares pixels with detector.amplifiers[0].data; give each raw pixel to one section"},
		{"overscan: [51, 55, 1, 40]", "overscan: [51, 55]", "p.yaml:46: detector.amplifiers[0].overscan: the section has 2 numbers; give x1, x2, y1, y2, or none without overscan"},
		{"overscan: [51, 55, 1, 40]", "overscan: [51, 55, 1, 39]", "p.yaml:46: detector.amplifiers[0].overscan: the rows 1 to 39 are not those of the data, 1 to 40; give the overscan beside the data"},
		{"overscan: [56, 60, 1, 40]", "overscan: [55, 60, 1, 40]", "p.yaml:51: detector.amplifiers[1].overscan: the section shares pixels with detector.amplifiers[0].overscan; give each raw pixel to one section"},
		{"overscan: [56, 60, 1, 40]", "overscan: [60, 56, 1, 40]", "p.yaml:51: detector.amplifiers[1].overscan: [60 56 1 40] is no section x1, x2, y1, y2 of pixels from 1 to 65536; give each first not above its last"},
		{"gain_e_per_adu: 1.5", "gain_e_per_adu: 0", "p.yaml:47: detector.amplifiers[0].gain_e_per_adu: 0 is not above 0; give a positive number"},
		{"read_noise_e: 4", "read_noise_e: 0", "p.yaml:53: detector.amplifiers[1].read_noise_e: 0 is not above 0; give a positive number"},
		{"bias_adu: 1000", "bias_adu: -1", "p.yaml:49: detector.amplifiers[0].bias_adu: -1 is below 0; give a number not below 0"},
		{"bias_adu: 900", "bias_adu: 50000", "p.yaml:54: detector.amplifiers[1].bias_adu: 50000 lies not below saturation_adu, 50000; correct one of them"},
		{"  dark_e_per_s: 0", "  dark_e_per_s: -0.1", "p.yaml:55: detector.dark_e_per_s: -0.1 is below 0; give a number not below 0"},
		{"  saturation_adu: 50000", "  saturation_adu: 65535", "p.yaml:56: detector.saturation_adu: 65535 is not between 0 and 65535; give the lowest raw value that is not to be trusted"},
		// slope 1 - 2 c m at c = 1e-5 reaches 0 at 50000 ADU, the level sampled last
		{"linearity: [-1.0e-6, 0]", "linearity: [-1.0e-5]", "p.yaml:57: detector.linearity: the corrected level does not rise at 50000 ADU above bias; give coefficients that hold up to saturation"},
		{"linearity: [-1.0e-6, 0]", "linearity: [0, 0, 0, 0, 0, 0, 0, 0, 0]", "p.yaml:57: detector.linearity: there are 9 coefficients; give at most 8"},
		{"  read_s: 0", "  read_s: -1", "p.yaml:58: detector.read_s: -1 is below 0; give a number not below 0"},
		{"kind: fowler", "kind: slow", `p.yaml:59: detector.read_mode.kind: "slow" is unknown; write single, double, fowler or ramp`},
		{"kind: fowler, ", "", "p.yaml:59: detector.read_mode.kind: the key is missing; add it"},
		{"reads: 8, ", "", "p.yaml:59: detector.read_mode.reads: 0 is outside 1 to 10000; give a whole number in this range"},
		{"reads: 8", "reads: 101", "p.yaml:59: detector.read_mode.spacing: 0.01 times 101 reads is not between 0 and 1; give a spacing with which the first group ends before the second begins"},
		{"kind: fowler, reads: 8", "kind: ramp, reads: 1", "p.yaml:59: detector.read_mode.reads: 1 is outside 2 to 10000; give a whole number in this range"},
		{"kind: fowler", "kind: ramp", "p.yaml:59: detector.read_mode.spacing: 0.01 has no effect on a ramp, whose reads fill the exposure; leave it out"},
		{"kind: fowler", "kind: double", "p.yaml:59: detector.read_mode: reads and spacing have no effect on double; leave them out, or give kind fowler or ramp"},
		{"step: SEQSTEP", "step: seqstep", `p.yaml:61: keywords.step: "seqstep" is no FITS keyword; write 1 to 8 capital letters, digits, hyphens or underscores`},
		{"maskid: PATTERN", "maskid: PATTERNID", `p.yaml:62: keywords.maskid: "PATTERNID" is no FITS keyword; write 1 to 8 capital letters, digits, hyphens or underscores`},
		{"kind: OBSTYPE", "kind: ''", `p.yaml:63: keywords.kind: "" is no FITS keyword; write 1 to 8 capital letters, digits, hyphens or underscores`},
		{"exptime: TEXP", "exptime: T EXP", `p.yaml:64: keywords.exptime: "T EXP" is no FITS keyword; write 1 to 8 capital letters, digits, hyphens or underscores`},
		{"date_obs: DATE-BEG", "date_obs: 2031-04-05", `p.yaml:65: keywords.date_obs: "2031-04-05" is no FITS keyword; write 1 to 8 capital letters, digits, hyphens or underscores`},
		{"airmass: SECZ", "airmass: TEXP", `p.yaml:66: keywords.airmass: "TEXP" is keywords.exptime as well; give each its own`},
		{"ra: TELRA", "ra: TELESC.RA", `p.yaml:67: keywords.ra: "TELESC.RA" is no FITS keyword; write 1 to 8 capital letters, digits, hyphens or underscores`},
		{"dec: TELDEC", "dec: TELRA", `p.yaml:68: keywords.dec: "TELRA" is keywords.ra as well; give each its own`},
		{"rotang: POSANG", "rotang: [POSANG]", "p.yaml:69: keywords.rotang: text is wanted, not a list; write one word or quoted text"},
		{"instrume: CAMERA", "instrument: CAMERA", "p.yaml:70: keywords.instrument: unknown key; write instrume"},
		{"bias: ZERO", "bias: 0", "p.yaml:72: kinds.bias: text is wanted, not 0; put it in quotes if it is meant as text"},
		{"dark: DARK", "dark: ' DARK'", `p.yaml:73: kinds.dark: " DARK" is no word of a FITS header; write 1 to 68 printable ASCII characters without spaces at the ends`},
		{"flat: LAMPFLAT", "flat: DARK", `p.yaml:74: kinds.flat: "DARK" is kinds.dark as well; give each its own`},
		{"arc: LAMPARC", "arc: ''", `p.yaml:75: kinds.arc: "" is no word of a FITS header; write 1 to 68 printable ASCII characters without spaces at the ends`},
		{"all-on: OPEN", "all-on: ÖFFEN", `p.yaml:76: kinds.all-on: "ÖFFEN" is no word of a FITS header; write 1 to 68 printable ASCII characters without spaces at the ends`},
		{"all-off: SHUT", "all-off: OPEN", `p.yaml:77: kinds.all-off: "OPEN" is kinds.all-on as well; give each its own`},
		{"science: OBJECT", "object: science", "p.yaml:78: kinds.object: unknown key; the keys here are bias, dark, flat, arc, all-on, all-off, science, refstar"},
		{"refstar: STANDARD", "refstar: ZERO", `p.yaml:79: kinds.refstar: "ZERO" is kinds.bias as well; give each its own`},
		{"  first_nm: 490", "  first_nm: -490", "p.yaml:81: grid.first_nm: -490 is not above 0; give a positive number"},
		{"  first_nm: 490", "  first_nm: 440", "p.yaml:80: grid: its wavelengths fall on columns -66.9 to -28.9 of a detector of 100 for the middle of the field; correct the grid or the spectrograph"},
		{"  step_nm: 0.5", "  step_nm: 0.39", "p.yaml:82: grid.step_nm: voxels are 0.772 to 0.784 px wide where 0.8 to 1.25 are wanted; give a step of about 0.5011 nm"},
		{"  count: 41", "  count: 41\n  axis: air", `p.yaml:84: grid.axis: "air" is unknown; use wave (vacuum) or awav (air)`},
		{"  count: 41", "  count: 0", "p.yaml:83: grid.count: 0 is outside 1 to 65536; give a whole number in this range"},
		{"    - {wavelength_nm: 450, fraction: 0}\n    - {wavelength_nm: 550, fraction: 1}\n", "    - {wavelength_nm: 350, fraction: 1}\n    - {wavelength_nm: 450, fraction: 1}\n", "p.yaml:80: grid: no light of 490 to 510 nm passes the throughput tables; correct the grid or the tables"},
	} {
		require.Equal(t, 1, strings.Count(plain, c.old), "%q must stand once in plain", c.old)
		p, err := parsePlain(strings.Replace(plain, c.old, c.replacement, 1))
		require.EqualError(t, err, c.want)
		require.Nil(t, p)
		spoilt[c.old] = true
	}
	requireEveryLine(t, spoilt)
}

// requireEveryLine checks the table itself: every value of plain was spoilt.
func requireEveryLine(t *testing.T, spoilt map[string]bool) {
	t.Helper()
	for _, line := range strings.Split(strings.TrimSpace(plain), "\n") {
		if strings.HasSuffix(line, ":") { // a heading; missing ones are TestMissingKeys' to find
			continue
		}
		found := false
		for old := range spoilt {
			found = found || strings.Contains(line, strings.TrimSpace(old)) || strings.Contains(old, line)
		}
		require.True(t, found || pairedLine(line), "no row spoils %q", line)
	}
}

// pairedLine: keys that both amplifiers have are spoilt in one of them.
func pairedLine(line string) bool {
	for _, key := range []string{"gain_e_per_adu", "read_noise_e"} {
		if strings.Contains(line, key) {
			return true
		}
	}
	return false
}

// TestMissingKeys deletes every key in turn, headings with all below them: the
// sentence names its path, or the key is optional and the default takes over.
func TestMissingKeys(t *testing.T) {
	optional := map[string]bool{
		"dmd.parity": true, "dmd.stuck_csv": true, "detector.linearity": true, "detector.read_mode": true, "keywords": true, "kinds": true,
		"detector.amplifiers[0].overscan": true, "detector.amplifiers[1].overscan": true,
	}
	lines := strings.Split(strings.TrimSpace(plain), "\n")
	depth := func(line string) int { return len(line) - len(strings.TrimLeft(line, " ")) }
	heading, amplifier := "", -1
	for i, line := range lines {
		key, _, _ := strings.Cut(strings.TrimSpace(line), ":")
		if strings.HasPrefix(key, "- {") {
			continue // rows of tables
		}
		path := heading + "." + key
		switch depth(line) {
		case 0:
			heading, amplifier = key, -1
			path = key
		case 4, 6:
			if strings.HasPrefix(key, "- ") { // the first key of an amplifier: its dash must stay
				amplifier++
				continue
			}
			path = "detector.amplifiers[" + string(rune('0'+amplifier)) + "]." + key
		}
		rest := append([]string{}, lines[:i]...)
		after := i + 1
		for after < len(lines) && depth(lines[after]) > depth(line) {
			after++
		}
		text := strings.Join(append(rest, lines[after:]...), "\n")
		_, err := parsePlain(text)
		if optional[path] || heading == "keywords" || heading == "kinds" {
			require.NoError(t, err, path)
			continue
		}
		require.Error(t, err, path)
		var refusal *config.Error
		require.ErrorAs(t, err, &refusal, path)
		require.Equal(t, path, refusal.Path)
		require.Equal(t, "the key is missing; add it", refusal.What)
		require.Positive(t, refusal.Line)
	}
	_, err := parsePlain(strings.Replace(plain, "data: [1, 50, 1, 40]\n      overscan", "overscan", 1))
	require.EqualError(t, err, "p.yaml:45: detector.amplifiers[0].data: the key is missing; add it")
}

// TestDefaults: the values that section 9 of the design gives.
func TestDefaults(t *testing.T) {
	text := plain[:strings.Index(plain, "keywords:")] + plain[strings.Index(plain, "grid:"):]
	text = strings.Replace(text, "  parity: -1\n", "", 1)
	text = strings.Replace(text, "  stuck_csv: stuck.csv\n", "", 1)
	p, err := Parse("p.yaml", []byte(text), nil)
	require.NoError(t, err)
	require.Equal(t, Keywords{"STEP", "MASKID", "KIND", "EXPTIME", "DATE-OBS", "AIRMASS", "RA", "DEC", "ROTANG", "INSTRUME"}, p.Keywords)
	for _, kind := range []string{"bias", "dark", "flat", "arc", "all-on", "all-off", "science", "refstar"} {
		word, ok := p.Kinds.Word(kind)
		require.True(t, ok)
		require.Equal(t, kind, word)
	}
	require.Equal(t, 1, p.DMD.Parity)
	require.Empty(t, p.Files())
	require.Empty(t, p.Stuck())
	one, err := Parse("p.yaml", []byte(text+"keywords: {step: NUMBER}\n"), nil)
	require.NoError(t, err)
	require.Equal(t, "NUMBER", one.Keywords.Step)
	require.Equal(t, "MASKID", one.Keywords.MaskID)
}

func TestKinds(t *testing.T) {
	p, err := parsePlain(plain)
	require.NoError(t, err)
	word, ok := p.Kinds.Word("science")
	require.True(t, ok)
	require.Equal(t, "OBJECT", word)
	kind, ok := p.Kinds.Kind("SHUT")
	require.True(t, ok)
	require.Equal(t, "all-off", kind)
	_, ok = p.Kinds.Kind("science")
	require.False(t, ok)
	_, ok = p.Kinds.Word("OBJECT")
	require.False(t, ok)
}

// TestValidate: a profile built in Go meets the same checks, NaN included.
func TestValidate(t *testing.T) {
	p, err := parsePlain(plain)
	require.NoError(t, err)
	require.NoError(t, p.Validate())
	for _, c := range []struct {
		spoil func(*Profile)
		want  string
	}{
		{func(p *Profile) { p.DMD.PitchUM = math.NaN() }, "dmd.pitch_um: NaN is not above 0; give a positive number"},
		{func(p *Profile) { p.Spectrograph.SmilePerPx = math.Inf(1) }, "spectrograph.smile_per_px: +Inf is no finite number; give one"},
		{func(p *Profile) { p.Spectrograph.DispersionPxPerNM[1] = math.NaN() }, "spectrograph.dispersion_px_per_nm[1]: NaN is no finite number; give one"},
		{func(p *Profile) { p.Spectrograph.LSFFWHMPx = math.NaN() }, "spectrograph.lsf_fwhm_px: NaN px is below 3, too few for lines to be resampled well; give a wider line spread or bin less"},
		{func(p *Profile) { p.Detector.Amplifiers = nil }, "detector.amplifiers: there are 0 amplifiers; give 1 to 64"},
		{func(p *Profile) { p.Detector.Linearity = []float64{math.NaN()} }, "detector.linearity[0]: NaN is no finite number; give one"},
		{func(p *Profile) { p.Grid.StepNM = math.Inf(1) }, "grid.step_nm: +Inf is not above 0; give a positive number"},
		{func(p *Profile) { *p = Profile{} }, `name: "" is no profile name; write 1 to 32 letters, digits, dots, hyphens or underscores`},
	} {
		bad := *p
		c.spoil(&bad)
		require.EqualError(t, bad.Validate(), c.want)
	}
}
