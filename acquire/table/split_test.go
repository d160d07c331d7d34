package table

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
)

// Whatever the standard library writes as CSV is read back cell by cell:
// delimiters, quotes and line ends inside cells included. The writer is the
// reference.
func TestSplitReadsWhatTheStandardLibraryWrites(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 180))
	pieces := []string{"a", "1.5", ",", ";", "\"", "\n", "x y", "µ", "#", "'", "", "|"}
	for round := range 300 {
		var want [][]string
		for range 1 + rng.IntN(20) {
			row := make([]string, 2+rng.IntN(5))
			for j := range row {
				row[j] = "c"
				for range rng.IntN(5) {
					row[j] += pieces[rng.IntN(len(pieces))]
				}
				row[j] += "c"
			}
			want = append(want, row)
		}
		var b bytes.Buffer
		w := csv.NewWriter(&b)
		w.Comma = []rune{',', ';', '\t', '|'}[round%4]
		w.UseCRLF = round%2 == 1
		if err := w.WriteAll(want); err != nil {
			t.Fatal(err)
		}
		s := newSplitter(b.Bytes(), byte(w.Comma))
		line := 1
		for i := 0; s.next(); i++ {
			s.split()
			var got []string
			for _, c := range s.cells {
				got = append(got, strings.ReplaceAll(string(c), "\r\n", "\n"))
			}
			if i >= len(want) || !slices.Equal(got, want[i]) {
				t.Fatalf("round %d row %d: %q, want %q\n%s", round, i, got, want[min(i, len(want)-1)], b.String())
			}
			if s.at != line {
				t.Fatalf("round %d row %d: line %d, want %d", round, i, s.at, line)
			}
			line += 1 + strings.Count(strings.Join(want[i], ""), "\n")
		}
	}
}

func TestSplit(t *testing.T) {
	for _, c := range []struct {
		row   string
		delim byte
		want  []string
	}{
		{"a,b,c", ',', []string{"a", "b", "c"}},
		{"a,,c,", ',', []string{"a", "", "c", ""}},
		{"", ',', []string{""}},
		{",", ',', []string{"", ""}},
		{`"a","b"`, ',', []string{"a", "b"}},
		{`"a",`, ',', []string{"a", ""}},
		{`,"a"`, ',', []string{"", "a"}},
		{`"a""b",c`, ',', []string{`a"b`, "c"}},
		{`"""",c`, ',', []string{`"`, "c"}},
		{`"",c`, ',', []string{"", "c"}},
		{`"a,b" ,c`, ',', []string{"a,b", "c"}},
		{`  "a,b",c`, ',', []string{"a,b", "c"}},
		{`"a"b,c`, ',', []string{"ab", "c"}},
		{`5" disc,c`, ',', []string{`5" disc`, "c"}},
		{`a "b c" d`, ' ', []string{"a", "b c", "d"}},
		{"  a \t b  ", ' ', []string{"a", "b"}},
		{"\"a b\"\t\"c\"  ", ' ', []string{"a b", "c"}},
		{"\"a\"\tb", '\t', []string{"a", "b"}},
		{"a,b", 0, []string{"a,b"}},
	} {
		s := newSplitter([]byte(c.row+"\n"), c.delim)
		s.next()
		s.split()
		var got []string
		for _, x := range s.cells {
			got = append(got, string(x))
		}
		if !slices.Equal(got, c.want) || s.unclosed {
			t.Errorf("%q: %q, want %q", c.row, got, c.want)
		}
	}
}

func TestSplitOfUnclosedQuotes(t *testing.T) {
	s := newSplitter([]byte("\"a\nb,c\n\"d\ne\"\n"), ',')
	var lines []string
	for s.next() {
		s.split()
		lines = append(lines, fmt.Sprintf("%d:%d:%v", s.at, len(s.cells), s.unclosed))
	}
	// The first quote finds the one of line 3, as RFC 4180 has it; what stands
	// behind it there belongs to the cell; the quote in line 4 opens none.
	if got := strings.Join(lines, " "); got != "1:1:false 4:1:false" {
		t.Errorf("%s", got)
	}
}
