// Package arrows holds the one test of which package may import which.
package arrows

import (
	"os/exec"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// rule forbids packages (a prefix of import paths; module packages without the
// module's name) to the packages below from, whether direct or through others.
type rule struct {
	from      string
	forbidden []string
	why       string
}

var rules = []rule{
	{"hadamard", []string{"mirrorloom/fitsutil", "mirrorloom/calib", "mirrorloom/pipeline", "mirrorloom/cmd", "mirrorloom/configs"}, "hadamard is algebra"},
	{"fitsutil", []string{"mirrorloom/hadamard", "mirrorloom/calib", "mirrorloom/pipeline", "mirrorloom/cmd", "mirrorloom/configs"}, "fitsutil is a leaf that knows no meaning"},
	{"calib", []string{"mirrorloom/hadamard", "mirrorloom/fitsutil", "mirrorloom/pipeline", "mirrorloom/cmd", "mirrorloom/configs"}, "calib takes plain slices"},
	{"configs", []string{"mirrorloom/hadamard", "mirrorloom/fitsutil", "mirrorloom/calib", "mirrorloom/pipeline", "mirrorloom/cmd"}, "configs are data"},
	{"pipeline/instrument", []string{"mirrorloom/hadamard", "mirrorloom/calib", "mirrorloom/pipeline/sequence", "mirrorloom/pipeline/product", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce"}, "instrument holds parameters"},
	{"pipeline/scene", []string{"mirrorloom/hadamard", "mirrorloom/calib", "mirrorloom/fitsutil", "mirrorloom/pipeline/sequence", "mirrorloom/pipeline/product", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce"}, "scene declares a sky and draws none"},
	{"pipeline/forecast", []string{"mirrorloom/pipeline/product", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/extract", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "forecast is below plan and shares no light with rehearse"},
	{"pipeline/sequence", []string{"mirrorloom/hadamard", "mirrorloom/calib", "mirrorloom/pipeline/product", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce"}, "sequence is below product"},
	{"pipeline/product", []string{"mirrorloom/hadamard", "mirrorloom/calib", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce"}, "product has no algorithm"},
	{"pipeline/exposure", []string{"mirrorloom/hadamard", "mirrorloom/pipeline/sequence", "mirrorloom/pipeline/product", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce"}, "exposure knows the detector alone"},
	{"pipeline/parallel", []string{"mirrorloom"}, "parallel knows nothing"},
	{"pipeline/kept", []string{"mirrorloom/hadamard", "mirrorloom/calib", "mirrorloom/pipeline", "mirrorloom/configs", "mirrorloom/cmd"}, "kept knows no meaning"},
	{"pipeline/drawing", []string{"mirrorloom"}, "drawing knows nothing"},
	{"pipeline/trade", []string{"mirrorloom/pipeline/product", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/extract", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "trade is below plan"},
	{"pipeline/nightsheet/typeface", []string{"mirrorloom"}, "typeface knows nothing"},
	{"pipeline/nightsheet", []string{"mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/extract", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "the night sheet shows a plan"},
	{"pipeline/plan", []string{"mirrorloom/pipeline/nightsheet", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "plan is beside the others"},
	{"pipeline/rehearse", []string{"mirrorloom/pipeline/plan", "mirrorloom/pipeline/forecast", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "rehearse shares no code with the reduction"},
	{"pipeline/audit", []string{"mirrorloom/pipeline/product", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "audit is below pair"},
	{"pipeline/pair", []string{"mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "pair is beside the others"},
	{"pipeline/extract", []string{"mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "extract reads cubes and is below report"},
	{"pipeline/rowfile", []string{"mirrorloom"}, "rowfile knows nothing"},
	{"pipeline/view", []string{"mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "view reads runs, however they were made"},
	{"pipeline/register", []string{"mirrorloom/hadamard", "mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce"}, "register is below plan and reduce"},
	{"pipeline/combine", []string{"mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "combine reads runs, however they were made"},
	{"pipeline/reached", []string{"mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/pair", "mirrorloom/pipeline/report", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "reached holds a cube against a forecast, and is below reduce"},
	{"pipeline/report", []string{"mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/plan", "mirrorloom/pipeline/reduce", "mirrorloom/pipeline/demo"}, "report is below reduce"},
	{"pipeline/reduce", []string{"mirrorloom/pipeline/rehearse", "mirrorloom/pipeline/demo"}, "reduce must not know what rehearse drew"},
}

// direct forbids direct imports only: what a library needs inside is its own.
var direct = []rule{
	{"hadamard", []string{"os", "io/fs", "net"}, "hadamard does no I/O"},
	{"pipeline", []string{"github.com/spf13"}, "only cmd knows flags"},
	{"calib", []string{"os", "net", "github.com/spf13"}, "calib does no I/O"},
	{"fitsutil", []string{"github.com/spf13", "go.uber.org/zap"}, "fitsutil is a leaf"},
}

// rehearse may use calib/physics and nothing else of calib, nor hadamard, not
// even through others: an error in the reduction must not cancel itself in the
// simulator.
func TestRehearseSharesNoAlgebra(t *testing.T) {
	for _, p := range list(t) {
		if under(p.path, "pipeline/rehearse") {
			require.NotContains(t, p.deps, "mirrorloom/hadamard", p.path)
			require.NotContains(t, p.deps, "mirrorloom/calib", p.path)
		}
	}
}

func TestArrows(t *testing.T) {
	for _, p := range list(t) {
		for _, r := range rules {
			if under(p.path, r.from) {
				check(t, p.path, p.deps, r)
			}
		}
		for _, r := range direct {
			if under(p.path, r.from) {
				check(t, p.path, p.imports, r)
			}
		}
		if !strings.HasPrefix(p.path, "mirrorloom/cmd/") {
			require.NotContains(t, p.imports, "github.com/spf13/cobra", p.path)
		}
	}
}

func under(path, from string) bool {
	return path == "mirrorloom/"+from || strings.HasPrefix(path, "mirrorloom/"+from+"/")
}

func check(t *testing.T, path string, imports []string, r rule) {
	t.Helper()
	for _, imported := range imports {
		// Formulas checked against outside values serve everybody, rehearse too.
		if imported == "mirrorloom/calib/physics" && under(path, "pipeline") {
			continue
		}
		for _, f := range r.forbidden {
			if imported == f || strings.HasPrefix(imported, f+"/") {
				t.Errorf("%s must not import %s: %s", path, imported, r.why)
			}
		}
	}
}

type listed struct {
	path          string
	imports, deps []string
}

// list asks the go command for the module's packages without their tests.
func list(t *testing.T) []listed {
	t.Helper()
	cmd := exec.Command("go", "list", "-f", `{{.ImportPath}}|{{join .Imports " "}}|{{join .Deps " "}}`, "./...")
	cmd.Dir = outside.Root(t)
	out, err := cmd.Output()
	require.NoError(t, err)
	var all []listed
	for _, line := range strings.Split(strings.TrimSpace(string(out)), "\n") {
		f := strings.Split(line, "|")
		require.Len(t, f, 3, line)
		all = append(all, listed{f[0], strings.Fields(f[1]), strings.Fields(f[2])})
	}
	require.NotEmpty(t, all)
	return all
}
