package screen

import (
	"fmt"
	"io"
	"math"
	"strings"
)

// Live shows one picture after the other in one place: on a terminal drawn over
// the one before, elsewhere as plain lines, one for each change of what is to be
// done or watched out for.
type Live struct {
	w        io.Writer
	size     func() (width, height int)
	colour   bool
	terminal bool

	width, height int    // of the last picture
	said          string // last plain line, without what changes all the time
	open          bool
}

// NewLive shows on w. On a terminal, size is asked before every picture, so that a
// change of the window is followed; a nil size is no terminal.
func NewLive(w io.Writer, size func() (width, height int), colour bool) *Live {
	return &Live{w: w, size: size, terminal: size != nil, colour: colour}
}

// Terminal codes, of ECMA-48 and its common private modes.
const (
	enter     = "\x1b[?1049h\x1b[?25l\x1b[?7l" // second page, no cursor, no wrapping at the edge
	leave     = "\x1b[?7h\x1b[?25h\x1b[?1049l"
	home      = "\x1b[H"
	lineEnd   = "\x1b[K"
	pageEnd   = "\x1b[J"
	wholePage = "\x1b[2J"
)

// Show shows the model.
func (l *Live) Show(m Model) error {
	if !l.terminal {
		return l.line(m)
	}
	width, height := l.size()
	if width < 1 || height < 1 {
		width, height = 80, 24
	}
	var b strings.Builder
	if !l.open {
		b.WriteString(enter)
		l.open = true
	}
	if width != l.width || height != l.height {
		b.WriteString(wholePage)
		l.width, l.height = width, height
	}
	b.WriteString(home)
	// Every line is overwritten and its end erased, so that nothing flickers; the
	// last one ends in no line feed, which would scroll.
	lines := draw(m, width, height, l.colour)
	for i, line := range lines {
		if i > 0 {
			b.WriteString("\r\n")
		}
		b.WriteString(line)
		if columns(line) < width { // at the edge the cursor stands on the last character
			b.WriteString(lineEnd)
		}
	}
	if len(lines) < height {
		if len(lines) > 0 {
			b.WriteString("\r\n")
		}
		b.WriteString(pageEnd)
	}
	_, err := io.WriteString(l.w, b.String())
	return err
}

// columns is how many columns a drawn line takes, its codes left out.
func columns(line string) int {
	n := 0
	for len(line) > 0 {
		text, rest, coded := strings.Cut(line, "\x1b[")
		n += textWidth(text)
		if !coded {
			break
		}
		_, line, _ = strings.Cut(rest, "m")
	}
	return n
}

// Close gives the terminal back as it was. It may be called again.
func (l *Live) Close() error {
	if !l.open {
		return nil
	}
	l.open = false
	_, err := io.WriteString(l.w, leave)
	return err
}

// line writes what changed as one plain line.
func (l *Live) line(m Model) error {
	said := []string{m.Instruction}
	for _, n := range m.Notices {
		word := "caution: "
		if n.Stop {
			word = "STOP: "
		}
		said = append(said, word+n.Text)
	}
	for _, v := range m.Values {
		if v.Stale || v.Note != "" {
			note := v.Note
			if v.Stale {
				note = strings.TrimSpace("stale " + note)
			}
			said = append(said, v.Role+": "+note)
		}
	}
	key := strings.Join(said, "\n")
	if key == l.said {
		return nil
	}
	l.said = key
	_, err := fmt.Fprintln(l.w, Line(m))
	return err
}

// Line puts the model into one line of text, for logs and pipes.
func Line(m Model) string {
	var parts []string
	add := func(s string) {
		if s != "" {
			parts = append(parts, clean(s))
		}
	}
	add(m.Instruction)
	for _, n := range m.Notices {
		if n.Stop {
			add("STOP: " + n.Text)
		} else {
			add("caution: " + n.Text)
		}
	}
	for _, v := range m.Values {
		text := v.Role + " " + smallText(v)
		if v.Text != "" {
			text += " " + v.Unit
		}
		var notes []string
		if v.Stale {
			notes = append(notes, "stale")
		}
		if v.Note != "" {
			notes = append(notes, v.Note)
		}
		if v.Stale && !math.IsNaN(v.Age) {
			notes = append(notes, seconds(v.Age)+" ago")
		}
		if len(notes) > 0 {
			text += " (" + strings.Join(notes, ", ") + ")"
		}
		add(text)
	}
	return strings.Join(parts, "; ")
}
