package scpi

import (
	"bytes"
	"fmt"
	"strconv"
	"strings"
)

// maxLine is far above any reply that is a line of text.
const maxLine = 64 << 10

// splitter makes lines of bytes. A line ends with LF, CR or CR LF; empty ones are
// dropped.
type splitter struct {
	buf []byte
}

func (s *splitter) add(p []byte) { s.buf = append(s.buf, p...) }
func (s *splitter) clear()       { s.buf = s.buf[:0] }

// begun tells whether there is part of a line.
func (s *splitter) begun() bool { return len(bytes.Trim(s.buf, "\r\n ")) > 0 }

// next takes a line; false when no whole one is there. A line of more than 64 kB is
// an error, and dropped as far as it has come.
func (s *splitter) next() (string, bool, error) {
	for {
		i := bytes.IndexAny(s.buf, "\r\n")
		if i < 0 {
			if n := len(s.buf); n > maxLine {
				s.clear()
				return "", false, fmt.Errorf("%w: %d bytes without an end", ErrReply, n)
			}
			return "", false, nil
		}
		line := string(bytes.TrimSpace(s.buf[:i]))
		// One end alone is left in front, so that endsOpen can tell whether more
		// of it is to come.
		if s.buf[i] == '\r' && i+1 == len(s.buf) {
			s.buf = append(s.buf[:0], '\r')
			if line == "" {
				return "", false, nil
			}
			return line, true, nil
		}
		s.buf = append(s.buf[:0], s.buf[i+1:]...)
		if line != "" {
			return line, true, nil
		}
	}
}

// endsOpen tells whether all that is left is the CR of the line before, behind which
// an LF may come.
func (s *splitter) endsOpen() bool { return len(s.buf) == 1 && s.buf[0] == '\r' }

// Entry is one entry of an error queue.
type Entry struct {
	Code int // 0: none; < 0: of the standard; > 0: of the maker
	Text string
}

func (e Entry) String() string { return fmt.Sprintf("%d %s", e.Code, e.Text) }

// ParseEntry reads what SYST:ERR? replies: <int>,"text"; the text may lack its quotes,
// or be missing. A number above 0 alone is refused: it is rather the reply to
// another query.
func ParseEntry(reply string) (Entry, error) {
	number, text, both := strings.Cut(strings.TrimSpace(reply), ",")
	code, err := strconv.ParseInt(strings.TrimSpace(number), 10, 32)
	if err != nil || code > 0 && !both {
		return Entry{}, fmt.Errorf("%w: %q is no entry of an error queue", ErrReply, reply)
	}
	text = strings.TrimSpace(text)
	if n := len(text); n >= 2 && text[0] == '"' && text[n-1] == '"' {
		text = strings.ReplaceAll(text[1:n-1], `""`, `"`) // IEEE 488.2: a quote in a string is doubled
	}
	return Entry{Code: int(code), Text: text}, nil
}

// Identity is what an instrument says of itself; "" not known.
type Identity struct {
	Maker, Model, Serial, Firmware string
	Text                           string // as it was said
}

// ParseIdentity reads what *IDN? replies: four fields with commas between. "0" as
// serial number or firmware means that it is not known. Text without commas is taken
// for a model.
func ParseIdentity(reply string) Identity {
	id := Identity{Text: reply}
	f := strings.SplitN(reply, ",", 4)
	for i := range f {
		if f[i] = strings.TrimSpace(f[i]); f[i] == "0" && i >= 2 {
			f[i] = ""
		}
	}
	if len(f) == 1 {
		id.Model = f[0]
		return id
	}
	f = append(f, "", "")
	id.Maker, id.Model, id.Serial, id.Firmware = f[0], f[1], f[2], f[3]
	return id
}
