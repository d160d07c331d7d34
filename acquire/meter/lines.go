package meter

import (
	"bytes"
	"errors"
	"fmt"
)

const maxLine = 1000 // bytes; a longer line is none

// lines finds frames that end with LF, CR or both. Empty lines are dropped; of CR
// LF the frame has the CR, so that it is the same whether or not the LF has come.
//
// What was cut off by silence, or is too long, is dropped to its end: the rest of
// a line may read as another number.
type lines struct {
	dropping bool
	drop     func(line []byte) bool // lines that are no frames
	read     func(line []byte) ([]Reading, error)
}

func (l *lines) Scan(buf []byte, quiet bool) (skip, length int, readings []Reading, err error) {
	i := 0
	for i < len(buf) {
		n := bytes.IndexAny(buf[i:], "\r\n")
		switch {
		case n < 0 && (l.dropping || quiet || len(buf)-i > maxLine):
			l.dropping = true
			return len(buf), 0, nil, nil
		case n < 0:
			return i, 0, nil, nil
		case n == 0 || l.dropping || n > maxLine || l.drop(buf[i:i+n]):
			l.dropping = false
			i += n + 1
			continue
		}
		readings, err = l.read(buf[i : i+n])
		if err != nil {
			readings = nil
		}
		return i, n + 1, readings, err
	}
	return i, 0, nil, nil
}

// shown is a line as errors show it.
func shown(line []byte) string {
	if len(line) > 60 {
		return fmt.Sprintf("%q...", line[:60])
	}
	return fmt.Sprintf("%q", line)
}

// ErrOption is wrapped by errors about the options of a decoder.
var ErrOption = errors.New("option of the meter's format")

func optionError(format string, args ...any) error {
	return fmt.Errorf("%w: "+format, append([]any{ErrOption}, args...)...)
}
