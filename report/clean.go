package report

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Clean returns text fit to be shown: control characters, invisible format
// characters (those that turn the writing direction included), line and
// paragraph separators and bytes that are not UTF-8 become visible escapes such
// as \x1b and \u202e. What is shown then cannot move the cursor, change colours
// or pass for another name. Everything else stays as it is.
func Clean(text string) string {
	if isClean(text) {
		return text
	}
	var b strings.Builder
	for i := 0; i < len(text); {
		r, size := utf8.DecodeRuneInString(text[i:])
		switch {
		case r == utf8.RuneError && size == 1:
			fmt.Fprintf(&b, `\x%02x`, text[i])
		case !hidden(r):
			b.WriteRune(r)
		case r < 0x80:
			fmt.Fprintf(&b, `\x%02x`, r)
		case r <= 0xffff:
			fmt.Fprintf(&b, `\u%04x`, r)
		default:
			fmt.Fprintf(&b, `\U%08x`, r)
		}
		i += size
	}
	return b.String()
}

func isClean(text string) bool {
	for i := 0; i < len(text); i++ {
		if c := text[i]; c < ' ' || c >= 0x7f {
			// Not plain ASCII: look at it rune by rune.
			for j, r := range text {
				if hidden(r) || r == utf8.RuneError && !strings.HasPrefix(text[j:], "\ufffd") {
					return false
				}
			}
			return true
		}
	}
	return true
}

// hidden reports whether a rune does something instead of showing something, or
// may not stand in an XML file.
func hidden(r rune) bool {
	return unicode.IsControl(r) || unicode.Is(unicode.Cf, r) || r == '\u2028' || r == '\u2029' ||
		r&0xfffe == 0xfffe || r >= 0xfdd0 && r <= 0xfdef
}
