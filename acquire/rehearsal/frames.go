package rehearsal

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// frames is how an instrument says what it shows.
type frames struct {
	settings string // usual ones of the line
	ask      string // "" it speaks by itself
	scpi     bool
	twice    bool
	encode   func([]shown) string
	columns  bool // one line may hold several
}

func framesOf(m Meter) (frames, error) {
	switch m.Speaks {
	case "scpi":
		return frames{settings: "115200 8N1", scpi: true, encode: scpiReply}, nil
	case "text":
		return frames{settings: "115200 8N1", columns: true, encode: textLine}, nil
	}
	return frames{}, fmt.Errorf("%w: meter %s speaks %q", ErrConfig, m.Role, m.Speaks)
}

// check says what in the channels of a line the format cannot say.
func (f *frames) check(list []*channel) error {
	if len(list) > 1 && !f.columns {
		return fmt.Errorf("%w: %s has one value a frame, but line %s has %d meters", ErrConfig, list[0].Speaks, list[0].lineName(), len(list))
	}
	return nil
}

// scpiReply is the number form of bench meters; overload is an infinity.
func scpiReply(list []shown) string {
	s := list[0]
	if s.over {
		return fmt.Sprintf("%+.8E", math.Copysign(9.9e37, s.value))
	}
	return fmt.Sprintf("%+.8E", s.value)
}

// textLine is what a small program on a microcontroller prints: columns in SI
// units, with as many decimals as the display has.
func textLine(list []shown) string {
	var cells []string
	for _, s := range list {
		if s.over {
			cell := "OL"
			if s.value < 0 {
				cell = "-OL"
			}
			cells = append(cells, cell)
			continue
		}
		cells = append(cells, strconv.FormatFloat(s.value, 'f', decimals(s.digit), 64))
	}
	if len(list) == 1 {
		cells[0] += " " + list[0].unit
	}
	return strings.Join(cells, ",") + "\r\n"
}

// decimals is how many decimals show one count.
func decimals(digit float64) int {
	return min(12, max(0, int(math.Ceil(-math.Log10(digit)-1e-9))))
}
