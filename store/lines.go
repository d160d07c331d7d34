package store

import (
	"encoding/json"
	"fmt"

	"gatesill/store/record"
)

// packLines writes source lines as a JSON array of [first point, its line,
// number of points, lines from point to point]. Single points whose lines lie
// evenly apart, as in a file that lists its devices by turns, become one entry.
func packLines(lines []record.Lines) string {
	if len(lines) == 0 {
		return ""
	}
	b := []byte{'['}
	for i := 0; i < len(lines); {
		if i > 0 {
			b = append(b, ',')
		}
		r, step := lines[i], 1
		n := evenly(lines[i:])
		if n > 1 {
			r.Count, step = n, lines[i+1].Line-r.Line
		}
		b = fmt.Appendf(b, "[%d,%d,%d,%d]", r.Point, r.Line, r.Count, step)
		i += n
	}
	return string(append(b, ']'))
}

// evenly counts the single points at the beginning of lines that follow each
// other at the same distance, at least 1.
func evenly(lines []record.Lines) int {
	if len(lines) < 2 || lines[0].Count != 1 {
		return 1
	}
	n, step := 1, lines[1].Line-lines[0].Line
	for n < len(lines) && lines[n].Count == 1 && lines[n].Point == lines[n-1].Point+1 && lines[n].Line == lines[n-1].Line+step {
		n++
	}
	return n
}

// unpackLines reads what packLines wrote for a sweep of that many points.
func unpackLines(text string, points int) ([]record.Lines, error) {
	if text == "" {
		return nil, nil
	}
	var packed [][4]int
	if err := json.Unmarshal([]byte(text), &packed); err != nil {
		return nil, fmt.Errorf("%w: source lines: %w", ErrCorrupt, err)
	}
	var lines []record.Lines
	for _, p := range packed {
		first, line, count, step := p[0], p[1], p[2], p[3]
		if first < 0 || count < 1 || count > points-first {
			return nil, fmt.Errorf("%w: source lines %v of %d points", ErrCorrupt, p, points)
		}
		if step == 1 {
			lines = append(lines, record.Lines{Point: first, Line: line, Count: count})
			continue
		}
		for k := range count {
			lines = append(lines, record.Lines{Point: first + k, Line: line + k*step, Count: 1})
		}
	}
	return lines, nil
}
