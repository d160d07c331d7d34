package screen

import (
	"bytes"
	"strings"
	"testing"
)

// TestLastColumnStays: on a terminal that does not wrap, the cursor stays on the
// last character of a full line, and erasing from there would take it away.
func TestLastColumnStays(t *testing.T) {
	for _, colour := range []bool{false, true} {
		var b bytes.Buffer
		l := NewLive(&b, func() (int, int) { return 20, 5 }, colour)
		full := strings.Repeat("x", 19) + "é"
		if err := l.Show(Model{Title: "t", Lines: []string{full, "short"}}); err != nil {
			t.Fatal(err)
		}
		if strings.Contains(b.String(), "é"+lineEnd) || !strings.Contains(b.String(), full) {
			t.Errorf("colour %v: %q", colour, b.String())
		}
		if !strings.Contains(b.String(), "short"+lineEnd) {
			t.Errorf("colour %v: the end of a short line is not erased: %q", colour, b.String())
		}
	}
}
