package gauge

import (
	"fmt"
	"slices"
	"strings"
)

// whose is who read a value, and in which fixture; "" not known.
type whose struct{ operator, fixture string }

func whoseOf(m Measuring) whose { return whose{m.Operator, m.Fixture} }

func (w whose) words() string {
	if w.fixture == "" {
		return w.operator
	}
	return strings.TrimSpace(w.operator + " in " + w.fixture)
}

// likeWithLike parts what one device read at two occasions by who read it, those that
// did at both; what others read is left out and noted. All of it is one group where
// nobody is known to have measured at both; that none did is noted where it is known.
func (h *History) likeWithLike(at [2][]Measuring) [][2][]Measuring {
	var known [2][]whose
	for k, list := range at {
		for _, m := range list {
			if w := whoseOf(m); !slices.Contains(known[k], w) {
				known[k] = append(known[k], w)
			}
		}
	}
	both := slices.DeleteFunc(slices.Clone(known[0]), func(w whose) bool { return w == whose{} || !slices.Contains(known[1], w) })
	if len(both) == 0 {
		h.apart("operator", known, func(w whose) string { return w.operator })
		h.apart("fixture", known, func(w whose) string { return w.fixture })
		return [][2][]Measuring{at}
	}
	groups := make([][2][]Measuring, len(both))
	for k, list := range at {
		for _, m := range list {
			w := whoseOf(m)
			if i := slices.Index(both, w); i >= 0 {
				groups[i][k] = append(groups[i][k], m)
			} else if text := w.words(); text != "" && !slices.Contains(h.LeftOut, text) {
				h.LeftOut = append(h.LeftOut, text)
			}
		}
	}
	return groups
}

// apart notes that no level of a factor is common to the two occasions of a device.
func (h *History) apart(name string, known [2][]whose, of func(whose) string) {
	var levels [2][]string
	for k, list := range known {
		for _, w := range list {
			l := of(w)
			if l == "" || k == 1 && slices.Contains(levels[0], l) {
				return // not known, or the same
			}
			if !slices.Contains(levels[k], l) {
				levels[k] = append(levels[k], l)
			}
		}
	}
	i := slices.IndexFunc(h.Apart, func(a Apart) bool { return a.Name == name })
	if i < 0 {
		i = len(h.Apart)
		h.Apart = append(h.Apart, Apart{Name: name})
	}
	a := &h.Apart[i]
	for _, l := range levels[0] {
		if !slices.Contains(a.From, l) {
			a.From = append(a.From, l)
		}
	}
	for _, l := range levels[1] {
		if !slices.Contains(a.To, l) {
			a.To = append(a.To, l)
		}
	}
}

// orWho adds operators and fixtures to what a change common to all may come from.
func (h *History) orWho() string {
	text := ""
	for _, a := range h.Apart {
		text += ", the " + a.Name
	}
	return text
}

// whoWords says what was left out to compare like with like, and what could not be.
func (h *History) whoWords() []string {
	var out []string
	if len(h.LeftOut) > 0 {
		out = append(out, fmt.Sprintf("like with like: what %s read at one of the two only is left out", strings.Join(h.LeftOut, ", ")))
	}
	for _, a := range h.Apart {
		out = append(out, fmt.Sprintf("by another %s (%s, then %s): what these read apart is in every change", a.Name, strings.Join(a.From, ", "), strings.Join(a.To, ", ")))
	}
	return out
}
