package table

import (
	"regexp"
	"strings"
	"unicode"
)

// said is one thing that a comment says.
type said struct {
	kind  string // a role, a short name, or one of the talk constants
	key   string // as written, without unit
	value string
	unit  unit // of the key: VDD (V) = 12
}

var keyValue = regexp.MustCompile(`^([^:=]{1,60}?)\s*[:=]\s*(.+)$`)

// listen reads a comment: pairs like "VDD = 12 V", several in a line, with
// marks between them or without.
func listen(text string) []said {
	var list []said
	for _, part := range parts(bare(text)) {
		for _, pair := range pairs(part) {
			if s, ok := hear(pair); ok {
				list = append(list, s)
			}
		}
	}
	return list
}

// hear reads one pair.
func hear(part string) (said, bool) {
	key, value := "", ""
	if m := keyValue.FindStringSubmatch(part); m != nil {
		key, value = m[1], strings.TrimSpace(m[2])
	} else if k, v, ok := strings.Cut(part, " "); ok && unicode.IsDigit([]rune(v + " ")[0]) {
		key, value = k, v // VDD 12 V
	}
	if key == "" || value == "" {
		return said{}, false
	}
	s := keyOf(key)
	s.value = value
	return s, s.kind != ""
}

// keyOf tells what a key is about; the kind is "" when it is not known.
func keyOf(key string) said {
	s := said{key: key}
	if name, u, ok := splitUnit(key); ok && name != "" {
		s.key, s.unit = name, u
	}
	f := fold(s.key)
	if s.kind = talkWords[f]; s.kind == "" {
		if w, ok := words[f]; ok && (w.rank == sure || w.role == string(RoleOperator)) {
			s.kind = w.role
		}
	}
	if s.kind == roleTorT {
		s.kind = "temp"
	}
	return s
}

// numeric reports whether a number belongs to the key.
func (s said) numeric() bool {
	switch s.kind {
	case talkTol, talkRating, talkBurden, talkSpot, talkPulse, talkDuty, talkDelay, talkDwell, "vdd", "vd", "temp", string(RoleRL):
		return true
	}
	return false
}

// beforeNumber finds an equals sign or colon with a number behind it.
var beforeNumber = regexp.MustCompile(`\s*[:=]\s*[~≈]?[+-]?[0-9]`)

const (
	maxKeyWords = 4
	maxKey      = 60 // bytes of a key, as keyValue takes them
	maxPairs    = 20 // of one text
)

// pairs cuts a text where a condition with its number begins, though nothing
// stands between it and what is before: RL=10R VDD=12.05V. What is no such
// condition stays as it is.
func pairs(text string) []string {
	var list []string
	lo := 0
	for _, m := range beforeNumber.FindAllStringIndex(text, maxPairs) {
		if at := keyStart(text[lo:m[0]]); at > 0 {
			list = append(list, strings.TrimSpace(text[lo:lo+at]))
			lo += at
		}
	}
	return append(list, strings.TrimSpace(text[lo:]))
}

// keyStart is where the known key at the end of a text begins, 0 when the whole
// text is one or none is known. The shortest known key counts, made longer by
// words that leave its meaning: in "12 V T" it is T and not V T, a threshold.
func keyStart(text string) int {
	if len(text) <= maxKey && keyOf(text).numeric() {
		return 0
	}
	at, kind := 0, ""
	end := len(text)
	for range maxKeyWords {
		i := strings.LastIndexAny(strings.TrimRight(text[:end], " "), " \u00a0")
		if i < 0 {
			break
		}
		end = i
		tail := strings.TrimSpace(text[i:])
		if len(tail) > maxKey {
			break
		}
		if c := []rune(tail + " ")[0]; !unicode.IsLetter(c) && c != '(' && c != '[' {
			break // no word of a key: 10, ±1, %
		}
		s := keyOf(tail)
		if s.numeric() && (kind == "" || kind == s.kind) {
			at, kind = i, s.kind
		}
	}
	return at
}

// parts splits a comment at semicolons, bars, tabs, and commas that a blank
// follows; a comma between digits may be a decimal mark.
func parts(text string) []string {
	var list []string
	lo := 0
	for i := 0; i < len(text); i++ {
		c := text[i]
		if c == ';' || c == '|' || c == '\t' || c == ',' && i+1 < len(text) && text[i+1] == ' ' {
			list = append(list, strings.TrimSpace(text[lo:i]))
			lo = i + 1
		}
	}
	return append(list, strings.TrimSpace(text[lo:]))
}
