package fit

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// slack is what a statistic of so many honest draws may be off by: so many standard
// errors.
type slack struct{ errors, draws float64 }

// rms is that of an rms, as a share of it: 1/√(2n) a standard error.
func (s slack) rms() float64 { return s.errors / math.Sqrt(2*s.draws) }

// within is that of a share of 0.9 of the draws.
func (s slack) within() float64 { return s.errors * math.Sqrt(0.9*0.1/s.draws) }

// median is that of a median m of magnitudes of normal errors: a standard error is
// 1/(2 f √n), f being their density there, 0.4287/m.
func (s slack) median(m float64) float64 { return s.errors * m / (2 * 0.4287 * math.Sqrt(s.draws)) }

// honestRectangle is the median of |error|/u of errors that lie evenly within a limit,
// √3/2: such are those of the statements, whatever their u.
const honestRectangle = 0.866

// beyond names the bars that a cell misses by more than the slack.
func (r *cellResult) beyond(m testMode, s slack) string {
	var out []string
	if r.none > 0 || len(r.errors) == 0 {
		out = append(out, "value")
	}
	if !m.gains && r.rms() > r.bar()*(1+s.rms()) {
		out = append(out, "rms")
	}
	top := 0.82
	if m.gains {
		top = honestRectangle
	}
	if q := r.median(); q < 0.3-s.median(0.3) || q > top+s.median(top) {
		out = append(out, "median")
	}
	if r.within(2) < 0.9-s.within() {
		out = append(out, "2u")
	}
	return strings.Join(out, " ")
}

// key is the name of a cell in the lists below.
func (r *cellResult) key(m testMode) string {
	mode := "plain"
	switch {
	case m.both:
		mode = "both"
	case m.gains:
		mode = "gains"
	}
	return fmt.Sprintf("%s/%s/%s/%d/%.0f mV/%s", mode, r.family, r.circuit, r.counts, 1e3*r.step, amps(r.current))
}

// checkTestSet holds every cell to the bars. With many draws what a cell misses must
// be what unmet says of it, neither more nor less, so that a change shows; with few
// draws only gross errors of the cells that are not listed can be told.
func checkTestSet(t *testing.T, results []*cellResult, mode testMode, many bool) {
	t.Helper()
	unmet := map[string]string{}
	for _, u := range unmetCells {
		for k, bars := range u.cells {
			unmet[k] = bars
		}
	}
	for _, r := range results {
		key := r.key(mode)
		if !many {
			if got := r.beyond(mode, slack{4, float64(r.dealt)}); got != "" && unmet[key] == "" {
				t.Errorf("%s\nfar beyond: %s", r.line(mode), got)
			}
			continue
		}
		if got := r.beyond(mode, slack{2, float64(r.dealt)}); got != unmet[key] {
			t.Errorf("%s\n%q: %q, written down as %q", r.line(mode), key, got, unmet[key])
		}
	}
}
