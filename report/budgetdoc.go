package report

import (
	"math"

	"gatesill/fit"
)

// budgetKeys are the quantities whose budget is shown, in order.
var budgetKeys = []fit.Key{fit.KeyVgsth, fit.KeyVgsIdle, fit.KeyVt, fit.KeyBeta, fit.KeyGmIdle}

// sums are the three uncertainties by the names of their keys and in words.
var sums = []struct {
	sum  fit.Sum
	key  string
	name string
}{
	{fit.Within, "u", "within the session"},
	{fit.Between, "u_between", "between sessions"},
	{fit.Absolute, "u_absolute", "absolute"},
}

type lineDoc struct {
	Input           string   `json:"input"`
	U               number   `json:"u"`
	Unit            string   `json:"unit"`
	Coefficient     number   `json:"coefficient"`
	CoefficientUnit string   `json:"coefficient_unit"`
	Contribution    number   `json:"contribution"`
	Type            string   `json:"type"`
	Distribution    string   `json:"distribution"`
	Nu              number   `json:"nu"` // null: not limited
	Enters          []string `json:"enters"`
	Basis           optional `json:"basis"`
}

type totalDoc struct {
	U        number `json:"u"`
	NuEff    number `json:"nu_eff"` // null: not limited
	K        number `json:"k"`
	Expanded number `json:"expanded"`
}

func totalDocOf(t fit.Total) totalDoc {
	return totalDoc{number(t.U), number(t.Nu), number(t.K), number(t.Expanded)}
}

type budgetDoc struct {
	Unit   string    `json:"unit"`
	Lines  []lineDoc `json:"lines"`
	Totals byName    `json:"totals"`
}

// byName is a JSON object of the three sums, in their order, and of the difference
// between two devices on the same meters.
type byName struct {
	U         totalDoc `json:"u"`
	UBetween  totalDoc `json:"u_between"`
	UAbsolute totalDoc `json:"u_absolute"`
	OfTwo     totalDoc `json:"u_difference"`
}

// byBudget gives the budgets of a device, without those it has no value of.
func byBudget(r *fit.Result) *byKey[budgetDoc] {
	m := byKey[budgetDoc]{}
	for _, k := range budgetKeys {
		q := r.At(k)
		if !q.Ok() || q.Budget == nil {
			continue
		}
		unit := KeyOf(k).Suffix
		doc := budgetDoc{Unit: unit, Lines: []lineDoc{}}
		for _, c := range q.Budget.Largest() {
			own := c.Unit
			if own == "" {
				own = unit
			}
			doc.Lines = append(doc.Lines, lineDoc{c.Name, number(c.U), own, number(c.C), unit + "/" + own, number(c.Share()),
				c.Type, c.Shape, number(c.Nu), enters(c, func(i int) string { return sums[i].key }), optional(c.Basis)})
		}
		doc.Totals = byName{
			totalDocOf(q.Budget.Total(fit.Within)), totalDocOf(q.Budget.Total(fit.Between)), totalDocOf(q.Budget.Total(fit.Absolute)),
			totalDocOf(q.Budget.Difference()),
		}
		m[k] = doc
	}
	return &m
}

// enters lists the sums that a line enters.
func enters(c fit.Contribution, name func(i int) string) (list []string) {
	for i, s := range sums {
		if c.Input.In(s.sum) {
			list = append(list, name(i))
		}
	}
	return list
}

type shapeDoc struct {
	Knee         *fit.Quantity `json:"knee_V,omitempty"` // absent, as the next three, where the curve does not show it
	SubThreshold *fit.Quantity `json:"subthreshold_slope_factor,omitempty"`
	Lambda       *fit.Quantity `json:"lambda_per_V,omitempty"`
	Span         *fit.Quantity `json:"gate_span_V,omitempty"`
	Misfit       number        `json:"misfit"`
}

func shapeDocOf(s fit.Shape) *shapeDoc {
	known := func(q fit.Quantity) *fit.Quantity {
		if !q.Ok() {
			return nil
		}
		return &q
	}
	return &shapeDoc{known(s.Knee), known(s.SubThreshold), known(s.Lambda), known(s.Span), number(s.Misfit)}
}

// shapeLines tells in words what the curve shows beside its thresholds, for a device
// of which it shows anything.
func shapeLines(s fit.Shape) (lines []string) {
	for _, x := range []struct {
		q          fit.Quantity
		name, unit string
	}{
		{s.Knee, "width of the knee, 2 n kT/q of the fitted curve", "V"},
		{s.SubThreshold, "subthreshold slope factor n, from the exponential foot alone", ""},
		{s.Lambda, "channel-length modulation lambda", "1/V"},
		{s.Span, "gate voltage from 1 mA to where R_L takes nine tenths of the supply", "V"},
	} {
		if x.q.Ok() {
			lines = append(lines, x.name+": "+FormatQuantity(x.q, x.unit))
		}
	}
	if !math.IsNaN(s.Misfit) {
		lines = append(lines, "misfit (reduced chi-squared, floors of the model included; 0.03 to 0.1 is normal): "+FormatTwoDigits(s.Misfit, ""))
	}
	return lines
}
