package page

import (
	"bufio"
	"cmp"
	_ "embed"
	"fmt"
	"html/template"
	"io"
	"strings"

	"gatesill/fit"
	"gatesill/report"
	"gatesill/report/svg"
)

var (
	//go:embed sheet.html
	sheetLayout string
	//go:embed sheet.css
	sheetStyle string
	//go:embed sheet.js
	sheetScript string
)

// sheets are the pages of one purpose, each meant for one printed page: sets, bias.
var sheets = template.Must(template.Must(page.Clone()).Parse(sheetLayout))

// sheet is what every page of one purpose has.
type sheet struct {
	Policy string
	Style  template.CSS
	Script template.JS

	Kind, Title, Part string
	Lead              []template.HTML
	Tiles             []tile
	Notes             []alert
	Hashes            []field // of the lots
	Version           string
	Latest            string
}

// newSheet fills in what comes from the lots.
func newSheet(kind, title string, lots []*report.Sheet) sheet {
	s := sheet{Kind: kind, Title: title}
	var parts []string
	for _, l := range lots {
		name := report.Clean(l.Part.Name)
		if name != "" && (len(parts) == 0 || parts[len(parts)-1] != name) {
			parts = append(parts, name)
		}
		hash := report.Clean(l.Hash)
		s.Hashes = append(s.Hashes, field{Label: plain(l.Lot.Name), Value: plain(cmp.Or(hash, "none")), Given: hash != ""})
		s.Version = cmp.Or(s.Version, report.Clean(l.Version))
		s.Latest = max(s.Latest, report.Clean(l.Latest))
	}
	s.Part = strings.Join(parts, " with ")
	return s
}

// notes shows warnings with what to do about them, each code once.
func notes(of *report.Sheet, list []fit.Warning) []alert {
	var out []alert
	for _, w := range report.JoinWarnings(list) {
		out = append(out, alert{Text: rich(report.Sentence(w.Text)), Next: rich(of.Advice(w.Code).Next)})
	}
	return out
}

// writeSheet writes a page of the layout of that name. The view holds s.
func writeSheet(w io.Writer, name string, s *sheet, view any, foot string) error {
	css := svg.Style + style + sheetStyle + footRule(foot)
	s.Style, s.Script, s.Policy = template.CSS(css), template.JS(sheetScript), policy(css, sheetScript)
	b := bufio.NewWriterSize(w, 1<<16)
	if err := sheets.ExecuteTemplate(b, name, view); err != nil {
		return fmt.Errorf("page of %s: %w", foot, err)
	}
	return b.Flush()
}
