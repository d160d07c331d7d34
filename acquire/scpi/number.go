package scpi

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"gatesill/store/record"
)

// SCPI-1999 (volume 1, 7.2.1; from memory) says ±infinity as ±9.9E37 and 'not a
// number' as 9.91E37. Meters print them with more or fewer digits, so that they are
// told by magnitude.
const (
	leastMark = 9.0e37   // no reading is that great
	leastNaN  = 9.905e37 // half way from infinity to 'not a number'
)

// Number reads a number as instruments reply it: NR1, NR2 or NR3. With a state there
// is no number, and the value is NaN: over the range, below it, or missing, where the
// instrument says that it has none. Errors wrap [ErrReply].
func Number(text string) (float64, record.PointState, error) {
	t := strings.TrimSpace(text)
	if strings.Trim(t, "+-.0123456789eE") != "" { // ParseFloat takes more than instruments send
		return math.NaN(), "", fmt.Errorf("%w: %q is no number", ErrReply, text)
	}
	x, err := strconv.ParseFloat(t, 64)
	if err != nil {
		return math.NaN(), "", fmt.Errorf("%w: %q is no number", ErrReply, text)
	}
	switch m := math.Abs(x); {
	case m < leastMark:
		return x, "", nil
	case m > leastNaN:
		return math.NaN(), record.Missing, nil
	case x < 0:
		return math.NaN(), record.Underload, nil
	default:
		return math.NaN(), record.Overload, nil
	}
}
