package svg

import (
	"math"
	"strconv"
)

// path puts the points of a curve on the paper and marks those that are needed;
// false when there is nothing to draw.
func (t *transfer) path(cv *Curve) bool {
	t.points = t.points[:0]
	out, brk := cv.Out, true
	for i := range min(len(cv.X), len(cv.Y)) {
		for len(out) > 0 && out[0] < i {
			out = out[1:]
		}
		if len(out) > 0 && out[0] == i {
			continue // the line goes on past a point left out
		}
		x, y := cv.X[i], t.sign*cv.Y[i]
		if !drawable(x) || !drawable(y) || x < t.x.lo || x > t.x.hi || t.o.Axis == Logarithmic && !(y >= t.y.lo*(1-1e-9)) {
			brk = true
			continue
		}
		t.points = append(t.points, place{fineUnits(t.x.at(x)), fineUnits(t.y.at(y)), brk})
		brk = false
	}
	if len(t.points) == 0 {
		return false
	}
	t.thin()
	return true
}

// fineUnits rounds a place to whole fine units, held within reach of the paper.
func fineUnits(px float64) int {
	return int(math.Round(max(-1e5, min(px, 1e5)) * fine))
}

// thin marks the points that a drawn curve needs: leaving out the others moves
// it by less than 0.3 px (Ramer 1972; Douglas and Peucker 1973).
func (t *transfer) thin() {
	n := len(t.points)
	if cap(t.keep) < n {
		t.keep = make([]bool, n)
	}
	t.keep = t.keep[:n]
	for i := range t.keep {
		t.keep[i] = false
	}
	const limit = 0.3 * fine
	t.stack = t.stack[:0]
	from := 0
	for i := 1; i <= n; i++ {
		if i == n || t.points[i].brk {
			t.keep[from], t.keep[i-1] = true, true
			t.stack = append(t.stack, [2]int{from, i - 1})
			from = i
		}
	}
	for len(t.stack) > 0 {
		s := t.stack[len(t.stack)-1]
		t.stack = t.stack[:len(t.stack)-1]
		if s[1]-s[0] < 2 {
			continue
		}
		a, b := t.points[s[0]], t.points[s[1]]
		dx, dy := float64(b.x-a.x), float64(b.y-a.y)
		length := math.Hypot(dx, dy)
		worst, at := limit, -1
		for i := s[0] + 1; i < s[1]; i++ {
			px, py := float64(t.points[i].x-a.x), float64(t.points[i].y-a.y)
			away := math.Hypot(px, py)
			if length > 0 {
				away = math.Abs(px*dy-py*dx) / length
				// A curve that turns back has points beyond its ends.
				if dot := px*dx + py*dy; dot < 0 || dot > length*length {
					away = math.Max(away, math.Min(math.Hypot(px, py), math.Hypot(px-dx, py-dy)))
				}
			}
			if away > worst {
				worst, at = away, i
			}
		}
		if at >= 0 {
			t.keep[at] = true
			t.stack = append(t.stack, [2]int{s[0], at}, [2]int{at, s[1]})
		}
	}
}

// appendPath writes path data in whole units, relative, with as few characters
// as the grammar allows.
func appendPath(b []byte, points []place, keep []bool) []byte {
	x, y := 0, 0
	first, fresh := true, false
	for i, p := range points {
		if !keep[i] {
			continue
		}
		if p.brk {
			if first {
				b = append(b, 'M')
			} else {
				b = append(b, 'm')
			}
			b = strconv.AppendInt(b, int64(p.x-x), 10)
			b = appendNext(b, p.y-y)
			first, fresh = false, true
		} else {
			if fresh {
				b = append(b, 'l')
				b = strconv.AppendInt(b, int64(p.x-x), 10)
			} else {
				b = appendNext(b, p.x-x)
			}
			b = appendNext(b, p.y-y)
			fresh = false
		}
		x, y = p.x, p.y
		if p.brk && (i+1 == len(points) || points[i+1].brk) {
			b = append(b, "h0"...) // a lone point shows as a dot under round caps
			fresh = false
		}
	}
	return b
}

// appendNext writes a number behind another: a minus sign parts them by itself.
func appendNext(b []byte, n int) []byte {
	if n >= 0 {
		b = append(b, ' ')
	}
	return strconv.AppendInt(b, int64(n), 10)
}
