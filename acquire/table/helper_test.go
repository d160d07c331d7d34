package table

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"gatesill/store/record"
)

// mustRead reads a literal file that must be read.
func mustRead(t *testing.T, name, text string, opt Options) *File {
	t.Helper()
	f, err := Read(name, strings.NewReader(text), opt)
	if err != nil {
		t.Fatalf("%v (hint: %s)\n%s", err, hintOf(err), text)
	}
	checkFile(t, f)
	return f
}

func hintOf(err error) string {
	var e *Error
	if errors.As(err, &e) {
		return e.Hint
	}
	return ""
}

// show writes sweeps one a line: D1 up vg_v[2.0,2.1] id_a[1e-3,null].
func show(f *File) string {
	var b strings.Builder
	for i := range f.Sweeps {
		s := &f.Sweeps[i]
		b.WriteString(s.Device)
		for _, x := range []string{s.Lot, s.Package, s.Side} {
			if x != "" {
				b.WriteString("/" + x)
			}
		}
		fmt.Fprintf(&b, " %s", s.Direction)
		for _, c := range s.Columns {
			fmt.Fprintf(&b, " %s%s", c.Quantity, c.Text)
		}
		for _, m := range s.Marks {
			fmt.Fprintf(&b, " %d:%s=%s(%s)", m.Index, m.Quantity, m.State, m.Raw)
		}
		b.WriteByte('\n')
	}
	return b.String()
}

// checkShow compares what was read with the sweeps wanted, one a line.
func checkShow(t *testing.T, f *File, want string) {
	t.Helper()
	if got := strings.TrimSpace(show(f)); got != strings.TrimSpace(want) {
		t.Errorf("got\n%s\nwant\n%s\nnotes %q", got, strings.TrimSpace(want), f.Dialect.Notes)
	}
}

// wantError reads a literal file that must fail with the sentinel, with words in
// the message and in the hint.
func wantError(t *testing.T, name, text string, opt Options, sentinel error, words, hint string) {
	t.Helper()
	f, err := Read(name, strings.NewReader(text), opt)
	if err == nil {
		t.Fatalf("no error, read as\n%s notes %q", show(f), f.Dialect.Notes)
	}
	if !errors.Is(err, sentinel) {
		t.Errorf("error %v does not wrap %v", err, sentinel)
	}
	if !strings.Contains(err.Error(), words) {
		t.Errorf("error %q does not say %q", err, words)
	}
	if !strings.Contains(hintOf(err), hint) {
		t.Errorf("hint %q does not say %q", hintOf(err), hint)
	}
	if strings.ContainsAny(err.Error(), "\x1b\x00\n") {
		t.Errorf("error %q carries control characters", err)
	}
}

// checkFile checks what holds for every file that was read.
func checkFile(t *testing.T, f *File) {
	t.Helper()
	points := 0
	for i := range f.Sweeps {
		s := &f.Sweeps[i]
		points += s.Len()
		if err := record.CheckName("device", s.Device); err != nil {
			t.Errorf("sweep %d: %v", i, err)
		}
		if s.DataHash != s.Hash() {
			t.Errorf("sweep %d: the hash is not that of its columns", i)
		}
		marked := map[record.Quantity]int{}
		last := 0
		for _, m := range s.Marks {
			marked[m.Quantity]++
			if m.Index < last || m.Index >= s.Len() {
				t.Errorf("sweep %d: mark at %d out of order or range", i, m.Index)
			}
			last = m.Index
		}
		for _, c := range s.Columns {
			checkColumn(t, s, c, marked[c.Quantity])
		}
		covered := 0
		for _, l := range s.Lines {
			if l.Point != covered || l.Count < 1 || l.Line < 1 {
				t.Errorf("sweep %d: lines %+v", i, s.Lines)
				break
			}
			covered += l.Count
		}
		if covered != s.Len() {
			t.Errorf("sweep %d: lines cover %d of %d points", i, covered, s.Len())
		}
	}
	if points != f.Points {
		t.Errorf("%d points counted, %d there", f.Points, points)
	}
	if len(f.Refusals) > keptRows || len(f.Refusals) > f.Refused {
		t.Errorf("%d refusals kept of %d", len(f.Refusals), f.Refused)
	}
}

// checkColumn checks that text and numbers of a column are the same.
func checkColumn(t *testing.T, s *Sweep, c record.Column, marks int) {
	t.Helper()
	if len(c.Values) != s.Len() {
		t.Errorf("%s: %d values, sweep has %d", c.Quantity, len(c.Values), s.Len())
	}
	var text []*float64
	if err := json.Unmarshal(c.Text, &text); err != nil {
		t.Errorf("%s: %v in %.100s", c.Quantity, err, c.Text)
		return
	}
	if len(text) != len(c.Values) {
		t.Errorf("%s: %d in the text, %d values", c.Quantity, len(text), len(c.Values))
		return
	}
	states := 0
	for i, x := range c.Values {
		switch {
		case math.IsNaN(x):
			states++
			if text[i] != nil {
				t.Errorf("%s point %d: no number beside %g", c.Quantity, i, *text[i])
			}
		case math.IsInf(x, 0):
			t.Errorf("%s point %d is %g", c.Quantity, i, x)
		case text[i] == nil || *text[i] != x:
			t.Errorf("%s point %d: %v in the text, value %g", c.Quantity, i, text[i], x)
		}
	}
	if states != marks {
		t.Errorf("%s: %d points without number, %d marks", c.Quantity, states, marks)
	}
}

func hasNote(f *File, words string) bool {
	for _, n := range f.Dialect.Notes {
		if strings.Contains(n, words) {
			return true
		}
	}
	return false
}

func hasRemark(f *File, code, words string) bool {
	for _, r := range f.Remarks {
		if r.Code == code && strings.Contains(r.Text, words) {
			return true
		}
	}
	return false
}

func ten() record.Num { return record.Known(0.01) }

// checkOneCell checks that text and value of a column of one cell agree.
func checkOneCell(t *testing.T, cell []byte, b buffer, state string) {
	t.Helper()
	var text []*float64
	if err := json.Unmarshal(b.text, &text); err != nil || len(text) != 1 || len(b.values) != 1 {
		t.Fatalf("%q: %s %v %v", cell, b.text, b.values, err)
	}
	x := b.values[0]
	if (text[0] == nil) != math.IsNaN(x) || (state != "") != math.IsNaN(x) || text[0] != nil && *text[0] != x {
		t.Fatalf("%q: %s, value %g, state %q", cell, b.text, x, state)
	}
}
