package report

import (
	"fmt"
	"math"
	"strings"

	"gatesill/fit"
)

// budgets writes how the uncertainties of one device come about, the largest
// contribution first, and what its curve tells beside.
func budgets(p *printer, s *Sheet, d *Device, style Style) {
	said := false
	for _, k := range budgetKeys {
		q := d.Result.At(k)
		if !q.Ok() || q.Budget == nil {
			continue
		}
		said = true
		p.line("")
		p.line("%s", style.paint("Uncertainty of "+s.KeyPhrase(k)+", "+FormatPlain(q.Value, q.U, KeyOf(k).Unit), bold))
		p.line("")
		p.grid(budgetGrid(q.Budget, KeyOf(k).Unit, style))
		p.line("")
		for _, x := range sums {
			p.line("  %s", totalLine(x.name, q.Budget.Total(x.sum), KeyOf(k).Unit))
		}
		p.line("  %s", totalLine("difference of two", q.Budget.Difference(), KeyOf(k).Unit))
	}
	p.line("")
	if !said {
		p.line("No value, so no budget.")
	} else {
		wrapped(p, "", "  ", "u is a standard uncertainty; coefficient times u is the contribution, and the roots of the sums of their squares are the uncertainties within the session, between sessions on one bench, and absolute, each of which holds the one before it; the difference of two is that between two such devices in one session on the same meters, each with its own temperature. "+
			"A: from the scatter of readings. B: from statements and assumptions.", style.Width)
	}
	if lines := shapeLines(d.Result.Shape); len(lines) > 0 {
		p.line("")
		p.line("%s", style.paint("The curve besides", bold))
		for _, l := range lines {
			wrapped(p, "  ", "    ", l, style.Width)
		}
	}
}

func budgetGrid(b *fit.Budget, unit string, style Style) grid {
	lines := b.Largest()
	n := len(lines)
	name, u, coefficient, share, kind, in := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	for i, c := range lines {
		name[i] = c.Name
		if c.Basis != "" {
			name[i] += " (" + c.Basis + ")"
		}
		own := c.Unit
		if own == "" {
			own = unit
		}
		u[i] = notGiven(c.U, own)
		coefficient[i] = FormatTwoDigits(c.C, unit) + " per " + own
		share[i] = notGiven(c.Share(), unit)
		kind[i] = c.Type
		if !math.IsInf(c.Nu, 1) {
			kind[i] += fmt.Sprintf(", nu %.2g", c.Nu)
		} else if c.Type == "B" {
			kind[i] += " " + c.Shape
		}
		in[i] = "all three"
		if names := enters(c, func(i int) string { return []string{"session", "between", "absolute"}[i] }); len(names) < len(sums) {
			in[i] = strings.Join(names, ", ")
		}
	}
	return grid{style: style, cols: []column{
		{head: "input", cells: name, wrap: 24},
		{head: "u", cells: u, right: true},
		{head: "coefficient", cells: coefficient, right: true},
		{head: "contribution", cells: share, right: true},
		{head: "type", cells: kind, rank: 2},
		{head: "enters", cells: in, rank: 1},
	}}
}

func notGiven(x float64, unit string) string {
	if math.IsNaN(x) {
		return "not given"
	}
	return FormatTwoDigits(x, unit)
}

// totalLine tells one of the three sums with its interval.
func totalLine(name string, t fit.Total, unit string) string {
	if math.IsNaN(t.U) {
		return fmt.Sprintf("%-20s not known: a statement is missing", name)
	}
	text := fmt.Sprintf("%-20s ± %s", name, FormatTwoDigits(t.U, unit))
	if math.IsNaN(t.K) {
		return text
	}
	nu := "above 1000"
	if t.Nu <= 1000 {
		nu = fmt.Sprintf("%.3g", t.Nu)
	}
	return text + fmt.Sprintf(" (k = 1); 95 %%: ± %s (k = %.2f, nu_eff %s)", FormatTwoDigits(t.Expanded, unit), t.K, nu)
}
