package job

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"gatesill/report/screen"
)

// No caution may fall off the lower edge of the screen: it would be taken note of
// without having been read.
func TestPagesShowEveryCaution(t *testing.T) {
	var texts []string
	for i := range 20 {
		texts = append(texts, strings.Repeat("some words of a caution ", 1+i%8)+"end"+string(rune('a'+i)))
	}
	for _, size := range [][2]int{{80, 24}, {120, 40}, {60, 20}} {
		seen := ""
		for _, page := range pages(texts, func() (int, int) { return size[0], size[1] }) {
			s := cautioning{texts: page}
			var b strings.Builder
			m := s.show(0)
			m.Title = "title"
			require.NoError(t, screen.Draw(&b, m, size[0]-1, size[1], false))
			seen += b.String()
		}
		for i := range texts {
			require.Contains(t, seen, "end"+string(rune('a'+i)), "%v", size)
		}
	}
}
