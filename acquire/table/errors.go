package table

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// Error gives the place and what is wrong there; the hint is not part of it.
func (e *Error) Error() string {
	place := e.File
	if e.Line > 0 {
		place += ":" + strconv.Itoa(e.Line)
	}
	if place == "" {
		return e.Err.Error()
	}
	return place + ": " + e.Err.Error()
}

// Unwrap returns what the error wraps.
func (e *Error) Unwrap() error { return e.Err }

// refused is an error that ends the file: it cannot be read as a table.
func (r *reader) refused(line int, format string, args ...any) *Error {
	return &Error{File: r.place, Line: line, Err: fmt.Errorf("%w: %s", ErrRefused, fmt.Sprintf(format, args...))}
}

// ambiguous is an error that ends the file until a flag settles it.
func (r *reader) ambiguous(line int, hint, format string, args ...any) *Error {
	return &Error{File: r.place, Line: line, Hint: hint, Err: fmt.Errorf("%w: %s", ErrAmbiguous, fmt.Sprintf(format, args...))}
}

// ask puts a question when somebody can answer, and returns the choice, or any
// answer to a question without choices. The error is ambiguous with the hint
// when nobody can answer, or when the answer is none of the choices.
func (r *reader) ask(q Question, line int, hint string) (string, error) {
	if r.opt.Ask == nil {
		return "", r.ambiguous(line, hint, "%s", q.Text)
	}
	answer, err := r.opt.Ask(q)
	if err != nil {
		return "", r.ambiguous(line, hint, "%s (%v)", q.Text, err)
	}
	if len(q.Choices) == 0 || slices.Contains(q.Choices, answer) {
		return answer, nil
	}
	return "", r.ambiguous(line, hint, "%s (answer %q is none of the choices)", q.Text, answer)
}

// cut shortens a text to n bytes and escapes what would reach a terminal as
// more than a character: control characters, invisible ones, broken UTF-8.
func cut(s string, n int) string {
	if len(s) > n {
		s = strings.ToValidUTF8(s[:n], "") + "..."
	}
	for i := 0; i < len(s); i++ {
		if s[i] < ' ' || s[i] >= 0x7f {
			return escape(s)
		}
	}
	return s
}

func escape(s string) string {
	var b strings.Builder
	for i, c := range s {
		switch {
		case c == utf8.RuneError && !strings.HasPrefix(s[i:], "\ufffd"):
			fmt.Fprintf(&b, `\x%02x`, s[i])
		case strconv.IsGraphic(c):
			b.WriteRune(c)
		default:
			q := strconv.QuoteRune(c)
			b.WriteString(q[1 : len(q)-1])
		}
	}
	return b.String()
}
