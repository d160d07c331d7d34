package main

import (
	"encoding/json"
	"os/exec"
	"strings"
	"testing"
)

// mayImport says which packages of the project each part of the house may
// import, by the longest matching prefix. A package may always import its own
// subpackages' siblings only where that is listed. The data flows one way:
// acquire -> store -> fit -> report.
var mayImport = map[string][]string{
	"store/record":      {},
	"store":             {"store/record"},
	"acquire":           {"store/record", "acquire/"},
	"acquire/rehearsal": {"store/record", "acquire/", "fit"}, // fit: the device equation
	"fit":               {"fit/lsq", "fit/stats"},
	"fit/lsq":           {},
	"fit/stats":         {},
	"fit/lot":           {"fit", "fit/stats"},
	"fit/match":         {"fit", "fit/stats", "fit/lot", "fit/match/blossom"},
	"fit/match/blossom": {},
	"fit/compare":       {"fit", "fit/stats", "fit/lot"},
	"fit/bias":          {"fit", "fit/stats", "fit/lot"},
	"fit/gauge":         {"fit", "fit/stats"},
	"fit/plan":          {"fit/stats"},
	"report":            {"store/record", "fit", "fit/lot", "fit/match", "fit/bias", "fit/compare", "fit/gauge", "fit/plan"},
	"report/screen":     {"store/record", "report"},                                                                                    // the terminal view of a live bench
	"report/internal":   {"store/record", "fit", "fit/lot", "fit/match", "fit/bias", "fit/compare", "fit/gauge", "fit/plan", "report"}, // invented sheets for tests
	"report/svg":        {"store/record", "fit", "fit/lot", "fit/match", "fit/bias", "fit/compare", "fit/gauge", "fit/plan", "report", "report/internal/"},
	"report/page":       {"store/record", "fit", "fit/lot", "fit/match", "fit/bias", "fit/compare", "fit/gauge", "fit/plan", "report", "report/svg", "report/internal/"},
	"report/live":       {"store/record", "fit", "fit/lot", "fit/match", "fit/bias", "fit/compare", "fit/gauge", "fit/plan", "report", "report/svg", "report/internal/"},
	"cmd/internal/job":  {"store", "acquire", "acquire/", "fit", "fit/", "report", "report/", "store/record"},
	"cmd/gatesill":      {"cmd/internal/job", "store/record", "acquire", "acquire/table", "acquire/keeper", "acquire/rehearsal", "report"},
}

// onlyImporter names, for each module that one package alone may import, that
// package; a trailing slash takes everything below too.
var onlyImporter = map[string][]string{
	"modernc.org/sqlite":              {"store"},
	"database/sql":                    {"store"},
	"gonum.org/v1/gonum":              {"fit", "fit/"},
	"go.bug.st/serial":                {"acquire/port"},
	"github.com/spf13/cobra":          {"cmd/gatesill"},
	"github.com/pelletier/go-toml/v2": {"acquire/bench"},
	"github.com/jedib0t/go-pretty/v6": {"report"},
	"github.com/vbauerster/mpb/v8":    {"cmd/internal/job"},
	"golang.org/x/text":               {"acquire/table"},
	"html/template":                   {"report/page", "report/live"},
	"github.com/google/uuid":          {"store"},
}

const module = "gatesill/"

type pkg struct {
	ImportPath string
	Imports    []string
}

func packages(t *testing.T) []pkg {
	t.Helper()
	out, err := exec.Command("go", "list", "-json=ImportPath,Imports", module+"...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	var ps []pkg
	for d := json.NewDecoder(strings.NewReader(string(out))); d.More(); {
		var p pkg
		if err := d.Decode(&p); err != nil {
			t.Fatal(err)
		}
		ps = append(ps, p)
	}
	return ps
}

// rule gives the imports allowed to a package, by its longest listed prefix.
func rule(path string) ([]string, bool) {
	for p := path; p != ""; {
		if r, ok := mayImport[p]; ok {
			return r, true
		}
		i := strings.LastIndexByte(p, '/')
		if i < 0 {
			break
		}
		p = p[:i]
	}
	return nil, false
}

func allowed(path string, rules []string) bool {
	for _, r := range rules {
		if path == r || strings.HasSuffix(r, "/") && strings.HasPrefix(path, r) {
			return true
		}
	}
	return false
}

func TestImportsFlowOneWay(t *testing.T) {
	ps := packages(t)
	if len(ps) < 10 {
		t.Fatalf("go list found %d packages only", len(ps))
	}
	for _, p := range ps {
		path := strings.TrimPrefix(p.ImportPath, module)
		rules, ok := rule(path)
		if !ok {
			t.Errorf("%s has no place in the house: add it to mayImport with a reason", path)
			continue
		}
		for _, imp := range p.Imports {
			if own, ok := strings.CutPrefix(imp, module); ok && !allowed(own, rules) {
				t.Errorf("%s imports %s; allowed: %v", path, own, rules)
			}
			if path == "store/record" && strings.Contains(strings.SplitN(imp, "/", 2)[0], ".") {
				t.Errorf("store/record imports %s: standard library only", imp)
			}
			for mod, importers := range onlyImporter {
				if (imp == mod || strings.HasPrefix(imp, mod+"/")) && !allowed(path, importers) && !(mod == "database/sql" && path == "store/record" && imp == "database/sql/driver") {
					t.Errorf("%s imports %s; only %v may", path, imp, importers)
				}
			}
		}
	}
}
