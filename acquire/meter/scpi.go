package meter

import (
	"bytes"
	"strings"
)

// scpi reads replies of one or several numbers joined with commas, NR1, NR2 or NR3
// of IEEE 488.2. A reply that is anything else is a bad frame; the question coming
// back as an echo is none.
func newSCPI(o Options) (Decoder, error) {
	list, err := unitList(o.Unit)
	if err != nil {
		return nil, err
	}
	question := []byte(strings.TrimSpace(o.Question))
	return &lines{
		drop: func(line []byte) bool {
			line = bytes.TrimSpace(line)
			return len(line) == 0 || len(question) > 0 && bytes.EqualFold(line, question)
		},
		read: func(line []byte) ([]Reading, error) { return scpiRead(line, list) },
	}, nil
}

func scpiRead(line []byte, list []written) ([]Reading, error) {
	fields := strings.Split(string(line), ",")
	readings := make([]Reading, len(fields))
	for i, f := range fields {
		r := &readings[i]
		r.Column = i + 1
		exp := 0
		if i < len(list) {
			list[i].onto(r)
			exp = list[i].exp
		}
		f = strings.TrimSpace(f)
		switch strings.ToUpper(f) { // SCPI 1999 volume 1, 7.2.1, from memory
		case "INF", "+INF":
			r.over(false)
			continue
		case "NINF", "-INF":
			r.over(true)
			continue
		case "NAN":
			r.missing()
			continue
		}
		d, rest, ok := readDecimal(f, '.')
		if !ok || rest != "" {
			return nil, bad("reply %s is no number", shown(line))
		}
		if err := d.into(r, exp); err != nil {
			return nil, err
		}
	}
	return readings, nil
}

// onto puts the unit into the reading.
func (w written) onto(r *Reading) { r.Unit, r.AC, r.DC = w.unit, w.ac, w.dc }
