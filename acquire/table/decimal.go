package table

import "bytes"

// evidence is what the numbers of the file say about the decimal mark.
type evidence struct {
	comma, point         int // numbers that can be read one way only
	weakComma, weakPoint int // numbers like 1,234: 1.234 or 1234
	groups               int // numbers with thousands marks beyond doubt
	example              string
}

// see adds what one cell says.
func (e *evidence) see(cell []byte) {
	t := trim(cell)
	if len(t) == 0 || len(t) > maxDigits {
		return
	}
	if t[0] == '+' || t[0] == '-' {
		t = t[1:]
	}
	n := 0
	for n < len(t) && (t[n]-'0' <= 9 || t[n] == ',' || t[n] == '.') {
		n++
	}
	num := t[:n]
	if n == 0 || n < len(t) && !looksNumber(t) {
		return
	}
	hasExp := n < len(t) && (t[n] == 'e' || t[n] == 'E')
	commas, points := bytes.Count(num, []byte{','}), bytes.Count(num, []byte{'.'})
	last := bytes.LastIndexAny(num, ",.")
	switch {
	case commas == 0 && points == 0:
	case commas > 0 && points > 0:
		mark := num[last]
		if bytes.Count(num, []byte{mark}) > 1 {
			return
		}
		e.strong(mark)
		e.groups++
	case commas > 1 || points > 1:
		mark := num[last]
		whole, _ := leadingDigits(string(num))
		if _, rest, ok := groups(whole, string(num[len(whole):]), mark); !ok || rest != "" {
			return // 1.2.2024 is no number
		}
		e.strong(other(mark))
		e.groups++
	default:
		frac := len(num) - last - 1
		if frac != 3 || last == 0 || last > 3 || num[0] == '0' || hasExp {
			e.strong(num[last])
			return
		}
		if num[last] == ',' {
			e.weakComma++
			if e.example == "" {
				e.example = string(num)
			}
		} else {
			e.weakPoint++
		}
	}
}

func (e *evidence) strong(mark byte) {
	if mark == ',' {
		e.comma++
	} else {
		e.point++
	}
}

func other(mark byte) byte {
	if mark == ',' {
		return '.'
	}
	return ','
}

// settled reports whether nothing more need be seen.
func (e *evidence) settled() bool {
	return e.comma > 0 || e.point > 0 || e.weakComma == 0
}

// findDecimal settles the decimal mark from the cells of the columns that hold
// numbers: once for the file, from the head of it, and from the whole file when
// the head leaves it open.
func (r *reader) findDecimal(columns []int) error {
	switch r.opt.Decimal {
	case "":
	case "point":
		r.num = numeral{'.', ','}
		return nil
	case "comma":
		r.num = numeral{',', '.'}
		return nil
	default:
		return r.refused(0, "decimal mark %q is not known: point or comma", r.opt.Decimal)
	}
	var e evidence
	see := func(cells [][]byte) {
		for _, c := range columns {
			if c < len(cells) {
				e.see(cells[c])
			}
		}
	}
	for _, s := range r.body {
		see(s.cells)
	}
	if !e.settled() {
		s := r.bodySplitter()
		for !e.settled() && s.next() {
			if len(s.row) <= maxLine && !r.marks.is(s.row) {
				s.split()
				see(s.cells)
			}
		}
	}
	return r.decideDecimal(e)
}

func (r *reader) decideDecimal(e evidence) error {
	mark := byte('.')
	switch {
	case e.comma > 0 && e.point > 0:
		m, err := r.askDecimal("some numbers have a decimal comma, others a decimal point")
		if err != nil {
			return err
		}
		mark = m
	case e.comma > 0:
		mark = ','
	case e.point > 0 || e.weakComma == 0:
	case r.delim == ';' && e.weakPoint == 0:
		mark = ','
		r.note("numbers like %s are read with a decimal comma: semicolon and decimal comma go together", e.example)
	default:
		m, err := r.askDecimal("a number like " + e.example + " may be " + string(bytes.Replace([]byte(e.example), []byte{','}, []byte{'.'}, 1)) +
			" or " + string(bytes.ReplaceAll([]byte(e.example), []byte{','}, nil)) + ", and no other number tells")
		if err != nil {
			return err
		}
		r.num = numeral{m, other(m)}
		return nil
	}
	r.num = numeral{mark: mark}
	if e.groups > 0 {
		r.num.group = other(mark)
	}
	return nil
}

func (r *reader) askDecimal(why string) (byte, error) {
	answer, err := r.ask(Question{Text: why, Choices: []string{"comma", "point"}, Flag: "--decimal"}, 0, "--decimal comma or --decimal point")
	if err != nil {
		return 0, err
	}
	if answer == "comma" {
		return ',', nil
	}
	return '.', nil
}
