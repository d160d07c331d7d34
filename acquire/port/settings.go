package port

import (
	"fmt"
	"strconv"
	"strings"
	"time"
)

// Settings of a serial line. The zero value is 9600 8N1.
type Settings struct {
	Baud     int
	DataBits int
	Parity   byte    // 'N', 'O', 'E'
	StopBits float64 // 1, 1.5, 2
	DTR, RTS *bool   // nil: DTR high, RTS low, which feeds opto-coupled leads
}

const (
	leastBaud    = 50
	greatestBaud = 4_000_000 // the fastest that Linux has a name for
)

// ByteTime is how long one byte takes at these settings, 0 without a baud rate.
func (s Settings) ByteTime() time.Duration {
	if s.Baud <= 0 {
		return 0
	}
	bits := 1 + float64(s.DataBits) + s.StopBits
	if s.Parity != 'N' && s.Parity != 0 {
		bits++
	}
	return time.Duration(bits / float64(s.Baud) * float64(time.Second))
}

// ParseSettings reads "2400 8N1", or "1200 7N2 dtr=0 rts=1". What is not said is
// 9600 8N1, DTR high, RTS low. Every error wraps [ErrSettings].
func ParseSettings(text string) (Settings, error) {
	var s Settings
	said := map[string]bool{}
	once := func(what string) error {
		if said[what] {
			return fmt.Errorf("%w %q: %s is said twice", ErrSettings, text, what)
		}
		said[what] = true
		return nil
	}
	for _, word := range strings.Fields(text) {
		var what string
		key, value, isPair := strings.Cut(strings.ToLower(word), "=")
		switch {
		case isPair && (key == "dtr" || key == "rts"):
			what = key
			if value != "0" && value != "1" {
				return Settings{}, fmt.Errorf("%w %q: %s must be 0 or 1, not %q", ErrSettings, text, key, value)
			}
			high := value == "1"
			if key == "dtr" {
				s.DTR = &high
			} else {
				s.RTS = &high
			}
		case isFrame(word):
			what = "the frame"
			s.DataBits = int(word[0] - '0')
			s.Parity = word[1] &^ 0x20 // upper case
			s.StopBits, _ = strconv.ParseFloat(word[2:], 64)
		default:
			what = "the baud rate"
			n, err := strconv.Atoi(word)
			if err != nil {
				return Settings{}, fmt.Errorf("%w %q: %q is neither a baud rate like 2400, nor a frame like 8N1, nor dtr=0, dtr=1, rts=0 or rts=1", ErrSettings, text, word)
			}
			if n == 0 { // which filled would take for 'not said'
				n = -1
			}
			s.Baud = n
		}
		if err := once(what); err != nil {
			return Settings{}, err
		}
	}
	s, err := s.filled()
	if err != nil {
		return Settings{}, fmt.Errorf("%w (in %q)", err, text)
	}
	return s, nil
}

// isFrame tells whether a word has the form of 8N1; its numbers are judged elsewhere.
func isFrame(w string) bool {
	if len(w) < 3 || w[0] < '0' || w[0] > '9' || !strings.ContainsRune("NOEnoe", rune(w[1])) {
		return false
	}
	switch w[2:] {
	case "1", "1.5", "2":
		return true
	}
	return false
}

// String gives the settings in the form that [ParseSettings] reads.
func (s Settings) String() string {
	text := fmt.Sprintf("%d %d%c%s", s.Baud, s.DataBits, s.Parity, strconv.FormatFloat(s.StopBits, 'g', -1, 64))
	for _, l := range []struct {
		name string
		high *bool
	}{{"dtr", s.DTR}, {"rts", s.RTS}} {
		if l.high != nil {
			text += fmt.Sprintf(" %s=%d", l.name, map[bool]int{false: 0, true: 1}[*l.high])
		}
	}
	return text
}

// filled puts 9600 8N1 where nothing is said, and refuses what no line can do.
func (s Settings) filled() (Settings, error) {
	if s.Baud == 0 {
		s.Baud = 9600
	}
	if s.DataBits == 0 {
		s.DataBits = 8
	}
	if s.Parity == 0 {
		s.Parity = 'N'
	}
	if s.StopBits == 0 {
		s.StopBits = 1
	}
	switch {
	case s.Baud < leastBaud || s.Baud > greatestBaud:
		return s, fmt.Errorf("%w: the baud rate must lie between %d and %d", ErrSettings, leastBaud, greatestBaud)
	case s.DataBits < 5 || s.DataBits > 8:
		return s, fmt.Errorf("%w: data bits must be 5 to 8, not %d", ErrSettings, s.DataBits)
	case s.Parity != 'N' && s.Parity != 'O' && s.Parity != 'E':
		return s, fmt.Errorf("%w: parity must be N, O or E, not %q", ErrSettings, s.Parity)
	case s.StopBits != 1 && s.StopBits != 1.5 && s.StopBits != 2:
		return s, fmt.Errorf("%w: stop bits must be 1, 1.5 or 2, not %g", ErrSettings, s.StopBits)
	}
	return s, nil
}

// lines gives the modem lines as they are to be set.
func (s Settings) lines() (dtr, rts bool) {
	dtr, rts = true, false
	if s.DTR != nil {
		dtr = *s.DTR
	}
	if s.RTS != nil {
		rts = *s.RTS
	}
	return dtr, rts
}
