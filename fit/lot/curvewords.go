package lot

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
)

// curveDistance is the distance of device i at the current where its curve
// departs farthest, NaN where it has no curve.
func (l *judge) curveDistance(i int) float64 {
	far := math.NaN()
	for _, c := range l.curve {
		j, ok := l.centers[c.key]
		if !ok {
			continue
		}
		if d := j.band.distance(c, i); !(math.Abs(d) <= math.Abs(far)) && !math.IsNaN(d) {
			far = d
		}
	}
	return far
}

// showLimit enters a limit; those of the curve are joined to the widest.
func (l *judge) showLimit(limits map[fit.Key]Limit, j judged) {
	lim := j.band.limit(j.col)
	if !isCurve(j.col.key) {
		limits[j.col.key] = lim
		return
	}
	if was, ok := limits[KeyCurve]; ok {
		lim.K, lim.Low, lim.High = math.Max(lim.K, was.K), math.Min(lim.Low, was.Low), math.Max(lim.High, was.High)
	}
	limits[KeyCurve] = lim
}

// curveSentence says where and by how much the curve of device i departs.
func curveSentence(j *judged, i int) string {
	off, way, limit := j.col.x[i]-j.band.mid, "more", j.band.high-j.band.mid
	if off < 0 {
		off, way, limit = -off, "less", j.band.mid-j.band.low
	}
	lot := "lot"
	if j.band.basis == BasisHistory {
		lot = "limit from earlier lots"
	}
	return fmt.Sprintf("at %s it needs %s %s gate voltage than its threshold and gain let expect (%s: within ±%s)",
		levelWords(j.col.at), millivolts(off), way, lot, millivolts(limit))
}

// lessThanLot gives the currents by which the curve of device i was judged where
// they are not all of the lot's, "" where they are; ok: it was judged.
func (l *judge) lessThanLot(i int) (text string, ok bool) {
	mask := l.curves.mask[i]
	if mask == 0 {
		return "", false
	}
	var has []float64
	for k, at := range l.curves.at {
		if mask>>k&1 == 1 {
			has = append(has, at)
		}
	}
	if len(has) == len(l.curves.at) {
		return "", true
	}
	return rangeWords(has), true
}

func rangeWords(at []float64) string {
	return levelWords(at[0]) + " to " + levelWords(at[len(at)-1])
}

// levelWords writes one of [fit.LevelCurrents], which have one digit.
func levelWords(i float64) string {
	for _, p := range []struct {
		from   float64
		prefix string
	}{{1, ""}, {1e-3, "m"}} {
		if i >= p.from*0.999 {
			return fmt.Sprintf("%.6g %sA", i/p.from, p.prefix)
		}
	}
	return fmt.Sprintf("%.6g µA", i*1e6)
}

// curveRange ends the sentence of a device that was judged on less than others.
func (l *judge) curveRange(i int) string {
	if text, _ := l.lessThanLot(i); text != "" {
		return "; it was judged on " + text + " only, the lot on " + rangeWords(l.curves.at)
	}
	return ""
}

// curveWarnings names the devices whose curve was judged on fewer currents than
// the lot's, or not at all: their curve may end early because the sweep did, or
// because they do.
func (l *judge) curveWarnings() []fit.Warning {
	judged := false
	for i := range l.judged {
		judged = judged || isCurve(l.judged[i].col.key)
	}
	if !judged {
		return nil
	}
	const most = 6 // devices named
	var parts []string
	n := 0
	for i := range l.devs {
		if !counts(&l.devs[i]) {
			continue
		}
		text, ok := l.lessThanLot(i)
		switch {
		case ok && text == "":
			continue
		case !ok:
			text = "not at all"
		default:
			text += " only"
		}
		if n++; n <= most {
			parts = append(parts, l.devs[i].Name+" "+text)
		}
	}
	if n == 0 {
		return nil
	}
	if n > most {
		parts = append(parts, fmt.Sprintf("and %d more", n-most))
	}
	return []fit.Warning{{Code: fit.CodeFewPoints, Text: fmt.Sprintf("the curves of the lot were judged on %s, but not of all devices: %s",
		rangeWords(l.curves.at), strings.Join(parts, ", "))}}
}

// sizeWarnings says for which quantities the devices are too few.
func (l *judge) sizeWarnings() []fit.Warning {
	if l.groups != nil && l.odd == nil {
		return nil
	}
	limited := map[fit.Key]band{}
	for _, j := range l.judged {
		limited[j.col.key] = j.band
	}
	cols := slices.Clone(l.family)
	if len(cols) == 0 {
		cols = []*column{l.columns[l.sortedBy]}
	}
	if c := l.widestCurve(); c != nil {
		cols = append(cols, c)
	}
	var out []fit.Warning
	for _, c := range cols {
		n := len(l.main(c).sorted)
		if n >= fewest {
			continue
		}
		text := fmt.Sprintf("too few to judge one another by %s: %d devices have a value, %d are needed", NameOf(c.key), n, fewest)
		if b, ok := limited[c.key]; ok && b.basis == BasisHistory {
			text += fmt.Sprintf("; the spread of %d earlier devices of this part is used", l.opt.Known.devices(c.key))
		} else {
			text += "; no device is flagged for standing apart in it"
		}
		out = append(out, fit.Warning{Code: fit.CodeNTooSmall, Text: text})
	}
	return out
}

// widestCurve is the departure that most devices have, nil where there is none.
func (l *judge) widestCurve() *column {
	var best *column
	for _, c := range l.curve {
		if best == nil || len(c.sorted) > len(best.sorted) {
			best = c
		}
	}
	return best
}
