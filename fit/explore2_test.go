package fit

import (
	"fmt"
	"strings"
	"testing"
)

func TestLinesExplore(t *testing.T) {
	for _, o := range outsideCurves(t) {
		if strings.Contains(o.file, "dense") {
			continue
		}
		s := o.setup
		s.TestCurrent = 1e-3
		s.IdleCurrent = .1
		r := One(o.curve, s)
		out := ""
		sg := 1.0
		if o.channelP {
			sg = -1
		}
		for _, m := range []string{"sqrt", "linear", "ratio"} {
			if v, ok := r.VtBy[m]; ok {
				out += fmt.Sprintf(" %s %+.2f(%.2f) b %.4f(%.4f) [%d,%d)", m, 1e3*(sg*v.Vt.Value-sg*o.vto), 1e3*v.Vt.U, v.Beta.Value, v.Beta.U, v.From, v.To)
			}
		}
		codes := ""
		for _, w := range r.Warnings {
			if w.Code != CodeNoAccuracy {
				codes += " " + w.Code
			}
		}
		fmt.Printf("%-32s %s n %d%s th %.4f(%.4f) gm %.3f(%.3f) gmi %.3f(%.3f) %s idss %.2g\n", o.file, r.State, len(o.vg), out, r.Theta.Value, r.Theta.U, r.GmMax.Value, r.GmMax.U, r.GmIdle.Value, r.GmIdle.U, codes, r.Idss.Value)
	}
}
