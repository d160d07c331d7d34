package report

import (
	"fmt"
	"math"
	"strings"

	"gatesill/fit/plan"
)

const (
	curveRows  = 11 // 100 %, 90 %, ... 0 %
	curveLabel = 7  // columns for the labels on the left
)

// curve draws the operating characteristic as text: a mark a column, and the two
// agreed points as o where they are known.
func (p *planPrinter) curve(a *plan.Accept) {
	width := 61
	if p.style.Width > 0 {
		width = max(21, min(width, (p.style.Width-curveLabel-2)/10*10+1))
	}
	end := a.Curve[len(a.Curve)-1].Bad
	rows := make([][]rune, curveRows)
	for i := range rows {
		rows[i] = []rune(strings.Repeat(" ", width))
	}
	put := func(bad, accepts float64, mark rune) {
		x := int(math.Round(bad / end * float64(width-1)))
		y := int(math.Round((1 - accepts) * (curveRows - 1)))
		if x >= 0 && x < width && y >= 0 && y < curveRows {
			rows[y][x] = mark
		}
	}
	for i := range width {
		k := int(math.Round(float64(i) / float64(width-1) * float64(len(a.Curve)-1)))
		put(a.Curve[k].Bad, a.Curve[k].Accepts, '*')
	}
	if isNumber(a.AtGood) {
		put(a.Good, a.AtGood, 'o')
	}
	if isNumber(a.AtBad) {
		put(a.Bad, a.AtBad, 'o')
	}
	p.line("accepted")
	for i, r := range rows {
		label := fmt.Sprintf("%d %%", 100-10*i)
		p.line("%*s |%s", curveLabel-2, label, strings.TrimRight(string(r), " "))
	}
	p.line("%*s +%s", curveLabel-2, "", strings.Repeat("-", width))
	axis := []rune(strings.Repeat(" ", width+curveLabel+8))
	for i := 0; i <= 5; i++ {
		text := strings.TrimSuffix(share(end*float64(i)/5), " %")
		at := curveLabel - 1 + (width-1)*i/5 - (len(text)-1)/2
		copy(axis[at:], []rune(text))
	}
	p.line("%s", strings.TrimRight(string(axis), " "))
	p.line("%*s  bad in the lot, %%", curveLabel-2, "")
}
