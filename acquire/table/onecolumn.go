package table

import (
	"bytes"
	"fmt"
	"strings"
)

// checkOneColumn asks about a file that is nothing but numbers like 1,234: one
// number with a decimal comma, one with a mark between thousands, or two
// numbers.
func (r *reader) checkOneColumn() error {
	if r.delim != ',' || r.opt.Delimiter != "" {
		return nil
	}
	if r.isDecimalList() {
		r.note("the comma is taken for the decimal mark of one column, not for a delimiter")
		return r.asOneColumn()
	}
	if r.headerLine > 0 {
		return nil
	}
	example := ""
	for _, s := range r.body {
		var e evidence
		e.see(s.row)
		if len(s.cells) != 2 || e.weakComma != 1 {
			return nil
		}
		if example == "" {
			example = string(trim(s.row))
		}
	}
	switch r.opt.Decimal {
	case "":
		point, whole := strings.Replace(example, ",", ".", 1), strings.Replace(example, ",", "", 1)
		answer, err := r.ask(Question{
			Text:    fmt.Sprintf("%s may be the number %s, the number %s, or two columns", example, point, whole),
			Choices: []string{"decimal comma", "decimal point", "delimiter comma"}, Flag: "--decimal or --delimiter",
		}, r.bodyLine, "--decimal comma ("+point+"), --decimal point ("+whole+") or --delimiter comma (two columns)")
		if err != nil {
			return err
		}
		if answer == "delimiter comma" {
			r.opt.Delimiter = "comma"
			return nil
		}
		r.opt.Decimal = strings.TrimPrefix(answer, "decimal ")
	}
	return r.asOneColumn()
}

// asOneColumn reads the head of the file again, uncut.
func (r *reader) asOneColumn() error {
	r.delim = 0
	r.headings, r.headerLine, r.headerRow, r.unitLine, r.unitCells, r.talk = nil, 0, nil, 0, nil, nil
	return r.findHeader()
}

// isDecimalList reports whether rows cut in two at a comma are one column with
// a decimal comma: --decimal says so, one header stands above, or what stands
// behind the comma begins with a zero, as no whole number does (3,05). Three
// digits behind every comma may be thousands, and are asked about.
func (r *reader) isDecimalList() bool {
	zero, weak := false, true
	for _, s := range r.body {
		if len(s.cells) != 2 {
			return false
		}
		a, b := bytes.TrimLeft(trim(s.cells[0]), "+-"), trim(s.cells[1])
		if !allDigits(a) || !allDigits(b) {
			return false
		}
		zero = zero || len(b) > 1 && b[0] == '0'
		weak = weak && len(b) == 3
	}
	if r.headerLine > 0 {
		return len(r.headings) == 1 && bytes.IndexByte(r.headerRow, ',') < 0
	}
	return r.opt.Decimal == "comma" || zero && !weak
}

func allDigits(t []byte) bool {
	for _, c := range t {
		if c-'0' > 9 {
			return false
		}
	}
	return len(t) > 0
}

// numbersWithUnits reports whether rows cut in two at blanks are numbers with
// their unit behind: 3.01 V.
func numbersWithUnits(rows []sampled) bool {
	seen := 0
	for _, s := range rows {
		if s.comment {
			continue
		}
		if len(s.cells) != 2 || kindOf(s.cells[0]) != number || kindOf(s.cells[1]) != text {
			if seen == 0 && len(s.cells) > 0 && kindOf(s.cells[0]) == text {
				continue // header
			}
			return false
		}
		if _, ok := readUnit(string(s.cells[1])); !ok {
			return false
		}
		seen++
	}
	return seen > 0
}
