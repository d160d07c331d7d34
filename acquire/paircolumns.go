package acquire

import (
	"math"
	"strconv"
	"strings"

	"gatesill/store/record"
)

// places is the number of decimals that hold a hundredth of a digit.
func places(digit float64) int {
	return max(0, 2-int(math.Floor(math.Log10(digit)+1e-9)))
}

// rounded is v as it is written with a hundredth of a digit; with nine figures when
// the digit is not known.
func rounded(v, digit float64) float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return v
	}
	x, err := strconv.ParseFloat(decimal(v, digit), 64)
	if err != nil {
		return v
	}
	return x
}

// decimal is v in the fewest characters that hold a hundredth of a digit.
func decimal(v, digit float64) string {
	if !(digit > 0) {
		return strconv.FormatFloat(mustFloat(strconv.FormatFloat(v, 'g', 9, 64)), 'g', -1, 64)
	}
	t := strconv.FormatFloat(v, 'f', places(digit), 64)
	if strings.Contains(t, ".") {
		t = strings.TrimRight(strings.TrimRight(t, "0"), ".")
	}
	if t == "-0" {
		t = "0"
	}
	return t
}

// mustFloat reads back what FormatFloat wrote.
func mustFloat(text string) float64 {
	x, _ := strconv.ParseFloat(text, 64)
	return x
}

const (
	timeDigit  = 0.1  // s: times are written to the millisecond
	boundDigit = 1e-3 // V: bounds to 10 µV, upwards
)

// Columns gives the points as the columns of a sweep, only those in which something
// stands, with marks for what has no number. Decimals are written with a hundredth of
// a digit of the meter at most.
func Columns(points []Point) ([]record.Column, []record.Mark) {
	if len(points) == 0 {
		return nil, nil
	}
	var columns []record.Column
	add := func(q record.Quantity, digit func(p *Point) float64, value func(p *Point) float64) {
		c := record.Column{Quantity: q, Values: make([]float64, len(points))}
		text, any := []byte{'['}, false
		for i := range points {
			if i > 0 {
				text = append(text, ',')
			}
			v := value(&points[i])
			if math.IsNaN(v) || math.IsInf(v, 0) {
				c.Values[i], text = math.NaN(), append(text, "null"...)
				any = any || marked(&points[i], q)
				continue
			}
			any = true
			t := decimal(v, digit(&points[i]))
			c.Values[i], text = mustFloat(t), append(text, t...)
		}
		if any {
			c.Text = append(text, ']')
			columns = append(columns, c)
		}
	}
	for _, m := range []struct {
		q     record.Quantity
		value func(p *Point) float64
	}{
		{record.VG, func(p *Point) float64 { return p.Vg }}, {record.ID, func(p *Point) float64 { return p.Id }},
		{record.VL, func(p *Point) float64 { return p.Vl }}, {record.VD, func(p *Point) float64 { return p.Vd }},
		{record.VDD, func(p *Point) float64 { return p.Vdd }}, {record.Temp, func(p *Point) float64 { return p.Temp }},
	} {
		add(m.q, func(p *Point) float64 { return p.Digits[m.q] }, m.value)
	}
	fixed := func(digit float64) func(*Point) float64 { return func(*Point) float64 { return digit } }
	add(record.T, fixed(timeDigit), func(p *Point) float64 { return p.At })
	add(record.PairBound, fixed(boundDigit), func(p *Point) float64 { return math.Ceil(p.Bound*1e5*(1-1e-12)) / 1e5 })
	add(record.Settled, fixed(1), func(p *Point) float64 {
		if p.Settled {
			return 1
		}
		return 0
	})
	var marks []record.Mark
	for i := range points {
		for _, m := range points[i].Marks {
			m.Index = i
			marks = append(marks, m)
		}
	}
	return columns, marks
}

func marked(p *Point, q record.Quantity) bool {
	for _, m := range p.Marks {
		if m.Quantity == q {
			return true
		}
	}
	return false
}
