package report

import (
	"strings"

	"github.com/jedib0t/go-pretty/v6/text"
)

func displayWidth(s string) int { return text.StringWidthWithoutEscSequences(s) }

// wrap breaks words at blanks into lines of at most width columns, of which the
// first line has indent already taken and the others indentRest. A word that is
// longer than a line is not broken. Width 0 or too small to be useful: one line.
func wrap(words string, width, indent, indentRest int) []string {
	if width < 20+max(indent, indentRest) {
		return []string{words}
	}
	var lines []string
	var b strings.Builder
	used := indent
	for _, word := range strings.Fields(words) {
		n := displayWidth(word)
		if b.Len() > 0 && used+1+n > width {
			lines = append(lines, b.String())
			b.Reset()
			used = indentRest
		}
		if b.Len() > 0 {
			b.WriteByte(' ')
			used++
		}
		b.WriteString(word)
		used += n
	}
	return append(lines, b.String())
}
