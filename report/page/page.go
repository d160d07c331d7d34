// Package page writes the report of a lot as one HTML file to read, print or
// keep, and pages of one purpose that print on one sheet of paper: sets, and bias. Everything it needs is inside: no font, script, style or picture is
// fetched, and the page's own policy forbids it.
//
// It computes no results and knows no present time: the same sheet always gives
// the same bytes. What was not given is shown as not given. It never says that
// a part is genuine, and it does not decide for the reader.
package page

import (
	"bufio"
	"crypto/sha256"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html/template"
	"io"
	"strings"

	"gatesill/report"
	"gatesill/report/svg"
)

var (
	//go:embed page.html
	layout string
	//go:embed page.css
	style string
	//go:embed page.js
	script string
)

var page = template.Must(template.New("page").Parse(layout))

// Write writes the report of a sheet as one HTML page.
func Write(w io.Writer, s report.Sheet) error {
	v := newView(&s)
	css := svg.Style + style + pageRule(&s)
	v.Style, v.Script = template.CSS(css), template.JS(script)
	v.Policy = policy(css, script)
	b := bufio.NewWriterSize(w, 1<<16)
	if err := page.Execute(b, v); err != nil {
		return fmt.Errorf("report page of lot %q: %w", s.Lot.Name, err)
	}
	return b.Flush()
}

// policy lets the page use what is inside it and nothing else.
func policy(css, script string) string {
	return strings.Join([]string{
		"default-src 'none'", "img-src data:", "style-src " + hash(css), "script-src " + hash(script),
		"base-uri 'none'", "form-action 'none'",
	}, "; ")
}

// hash names a text to the page's policy: only what was written here may run.
func hash(text string) string {
	sum := sha256.Sum256([]byte(text))
	return "'sha256-" + base64.StdEncoding.EncodeToString(sum[:]) + "'"
}

// pageRule numbers the printed pages and names the lot on each.
func pageRule(s *report.Sheet) string {
	left := "Lot " + s.Lot.Name
	if s.Hash != "" {
		left += "  ·  checksum " + s.Hash[:min(12, len(s.Hash))]
	}
	return footRule(left) + "@page wide{size:A4 landscape}\n"
}

// footRule is the rule of a printed page with words at its foot.
func footRule(left string) string {
	return "@page{size:A4;margin:16mm 14mm 18mm;" +
		"@bottom-left{content:" + cssString(left) + ";font:8pt sans-serif;color:#444}" +
		`@bottom-right{content:"page " counter(page) " of " counter(pages);font:8pt sans-serif;color:#444}}` + "\n"
}

// cssString writes text as a CSS string: everything but plain letters, digits
// and blanks is escaped, so that nothing can end the string or the style sheet.
func cssString(text string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range report.Clean(text) {
		switch {
		case r >= 'a' && r <= 'z', r >= 'A' && r <= 'Z', r >= '0' && r <= '9', r == ' ':
			b.WriteRune(r)
		default:
			fmt.Fprintf(&b, `\%06x`, r)
		}
	}
	b.WriteByte('"')
	return b.String()
}
