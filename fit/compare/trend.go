package compare

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit/stats"
)

// settled is the number of lots from which control limits are no longer provisional
// (common practice, no source).
const settled = 20

// TrendOf lays lots out in the order of time: the trimmed mean of each, limits of a
// chart of individual values over these means by their moving range, and all
// comparisons two by two.
//
// Inputs: two lots or more, at the same currents, the first the one that temperatures
// are held against, the others in any order, not modified; of opt By, Level,
// Repeatability, Tempco, TempcoU are used. With a Tempco every lot of known temperature
// is carried over to that of the first; without one, lots that are more than [Apart]
// warmer or colder than it are left out and named. Result: lots by the time of their first reading,
// those without one last and by name. A lot with fewer than 3 values, or with more
// that never reach the current than a trimmed mean leaves out, has a NaN centre.
// Limits are those of the lots with a time, NaN for fewer than 3 centres, and do not know how many devices stand
// behind each. Every pair: difference of trimmed means with p by Yuen's test,
// adjusted by Holm, and intervals that hold together at opt.Level by Bonferroni; what
// session and meters add is in them as in [Lots], and what the temperatures are
// uncertain by; control parts are not taken off, and serials are not paired. Errors: [ErrFewLots], [ErrSameLot],
// [ErrNothing], [ErrQuantity], [ErrLevel].
//
// Source: Shewhart's chart, see [stats.IndividualsChart]. Checked: TestTrend.
func TrendOf(lots []Lot, opt Options) (Trend, error) {
	opt.Margin = math.NaN()
	if err := opt.check(); err != nil {
		return Trend{}, err
	}
	if len(lots) < 2 {
		return Trend{}, ErrFewLots
	}
	names := map[string]bool{}
	for i := range lots {
		if names[lots[i].Name] {
			return Trend{}, fmt.Errorf("lot %q: named twice: %w", lots[i].Name, ErrSameLot)
		}
		names[lots[i].Name] = true
	}
	r := runOf(lots, opt)
	if !slices.ContainsFunc(r.lots, func(l trendLot) bool { return len(l.v.plain) > 0 }) {
		return Trend{}, fmt.Errorf("in any lot: %w", ErrNothing)
	}
	t := Trend{By: opt.By, Provisional: true}
	var centres []float64
	for _, l := range r.lots {
		t.Untimed = t.Untimed || l.v.lot.At == ""
		t.Lots = append(t.Lots, TrendLot{Name: l.v.lot.Name, At: l.v.lot.At, DateCode: l.v.lot.DateCode, N: len(l.v.plain),
			Centre: l.mean.Mean, U: l.mean.SE, SD: stats.SD(l.v.plain)})
		if !math.IsNaN(l.mean.Mean) && l.v.lot.At != "" {
			centres = append(centres, l.mean.Mean)
		}
	}
	t.Provisional = len(centres) < settled
	t.Centre, t.Low, t.High = stats.Mean(centres), math.NaN(), math.NaN()
	if len(centres) >= fewest {
		lim := stats.IndividualsChart(centres).Level
		t.Low, t.High = lim.Low, lim.High
	}
	for i := range t.Lots {
		t.Lots[i].Outside = t.Lots[i].At != "" && (t.Lots[i].Centre < t.Low || t.Lots[i].Centre > t.High)
	}
	t.Pairs = r.pairs()
	t.Text = r.words(&t)
	return t, nil
}

// run is lots in the order of time.
type run struct {
	opt     Options
	lots    []trendLot
	leftOut []string // too warm or too cold, in words
	unknown []string // lots whose temperature is not known, where the others are corrected
	warmth  float64  // °C, of the first lot, that the others are carried over to
}

type trendLot struct {
	v    *values
	mean stats.Trimmed // all NaN where there are too few values
	sharing
}

func runOf(lots []Lot, opt Options) *run {
	r := &run{opt: opt, warmth: lots[0].Temp}
	var byTime []*Lot
	for i := range lots {
		l := &lots[i]
		if warmer := l.Temp - r.warmth; math.Abs(warmer) > Apart && !r.corrects() {
			r.leftOut = append(r.leftOut, fmt.Sprintf("%s (%+.1f K)", l.Name, warmer))
			continue
		}
		byTime = append(byTime, l)
	}
	slices.SortStableFunc(byTime, func(a, b *Lot) int {
		if (a.At == "") != (b.At == "") {
			return cmp.Compare(b.At, a.At) // without a time: last
		}
		return cmp.Or(cmp.Compare(a.At, b.At), cmp.Compare(a.Name, b.Name))
	})
	var all []float64
	for _, l := range byTime {
		v := valuesOf(l, opt.By)
		r.carryOver(v)
		all = append(all, v.plain...)
		r.lots = append(r.lots, trendLot{v: v, sharing: sharingOf(l, v.of, opt.By, one)})
	}
	step := stepSpread(all)
	for i := range r.lots {
		l := &r.lots[i]
		l.mean = trimmedMean(l.v.x, math.Max(step, l.v.usual))
		if len(l.v.plain) < fewest {
			nan := math.NaN()
			l.mean = stats.Trimmed{N: l.mean.N, Mean: nan, WinsorizedSD: nan, SE: nan, DF: nan}
		}
	}
	return r
}

// corrects reports whether lots are carried over to one temperature.
func (r *run) corrects() bool { return !math.IsNaN(r.opt.Tempco) && !math.IsNaN(r.warmth) }

// carryOver takes off what the temperature of a lot does to its values.
func (r *run) carryOver(v *values) {
	if !r.corrects() {
		return
	}
	warmer := v.lot.Temp - r.warmth
	if math.IsNaN(warmer) {
		r.unknown = append(r.unknown, v.lot.Name)
		return
	}
	v.x, v.plain = less(v.x, r.opt.Tempco*warmer), less(v.plain, r.opt.Tempco*warmer)
}

// warmthWords says what the temperatures did to the run.
func (r *run) warmthWords() (text []string) {
	if r.corrects() {
		text = append(text, fmt.Sprintf("all lots are carried over to %.1f °C by %s mV/K", r.warmth, signed(r.opt.Tempco)))
	}
	if r.unknown != nil {
		text = append(text, "as read, for the temperature is not known: "+strings.Join(r.unknown, ", "))
	}
	if r.leftOut != nil {
		text = append(text, fmt.Sprintf("left out, more than %g K away from the %.1f °C of the first lot, and no slope given (--tempco): %s", Apart, r.warmth, strings.Join(r.leftOut, ", ")))
	}
	return text
}

// pairs compares every lot with every other.
func (r *run) pairs() []PairOfLots {
	n := len(r.lots)
	level := 1 - (1-r.opt.Level)/float64(n*(n-1)/2)
	var out []PairOfLots
	var p []float64
	for i := range r.lots {
		for j := i + 1; j < n; j++ {
			a, b := &r.lots[i], &r.lots[j]
			e := between(a.mean, b.mean)
			s := sharedOf(a.sharing, b.sharing)
			e.with(s.u, math.Inf(1))
			if warmer := b.v.lot.Temp - a.v.lot.Temp; r.corrects() && !math.IsNaN(warmer) {
				e.with(r.opt.tempU(warmer, !s.tempHeld), math.Inf(1))
			}
			nan := math.NaN()
			q := PairOfLots{A: a.v.lot.Name, B: b.v.lot.Name, Shift: e.shift, Low: nan, High: nan, P: nan}
			if e.ok() {
				q.Low, q.High = e.interval(level)
				q.P = e.p()
			}
			out, p = append(out, q), append(p, q.P)
		}
	}
	for i, a := range stats.Holm(p) {
		out[i].PAdjusted = a
	}
	return out
}

// words says what the run shows.
func (r *run) words(t *Trend) []string {
	text := r.warmthWords()
	if w, ok := r.overall(); ok {
		text = append(text, w)
	}
	alpha := 1 - r.opt.Level
	var apart []string
	had := 0
	for _, q := range t.Pairs {
		if !math.IsNaN(q.PAdjusted) {
			had++
		}
		if q.PAdjusted <= alpha {
			apart = append(apart, fmt.Sprintf("%s and %s (%s)", q.A, q.B, shiftWords(q.Shift)))
		}
	}
	switch {
	case had > 0 && len(apart) == 0:
		text = append(text, fmt.Sprintf("no two of the lots are seen to differ (%s, p adjusted by Holm)", stand(had, "comparison", "comparisons")))
	case len(apart) > 0:
		text = append(text, fmt.Sprintf("%d of %s differ: %s", len(apart), stand(had, "comparison", "comparisons"), firstOf(apart, 6)))
	}
	if r.missing() {
		text = append(text, "some lots were measured in other sessions or with other meters, and what that adds is not known: the intervals hold only the scatter of the devices")
	}
	var outside []string
	for _, l := range t.Lots {
		if l.Outside {
			outside = append(outside, l.Name)
		}
	}
	switch {
	case math.IsNaN(t.Low):
		text = append(text, fmt.Sprintf("no control limits: they need %d lots with a centre and a time", fewest))
	case len(outside) > 0:
		text = append(text, fmt.Sprintf("outside the control limits of %s to %s: %s", volts(t.Low), volts(t.High), strings.Join(outside, ", ")))
	default:
		text = append(text, fmt.Sprintf("all centres lie within the control limits of %s to %s", volts(t.Low), volts(t.High)))
	}
	if !math.IsNaN(t.Low) {
		text = append(text, "control limits judge the run, whether a lot falls out of what its forerunners varied by; whether two lots are the same is judged by the tests")
	}
	if t.Provisional && !math.IsNaN(t.Low) {
		text = append(text, fmt.Sprintf("the limits rest on %s and are provisional: %d settle them", stand(timed(t), "lot", "lots"), settled))
	}
	if t.Untimed && !math.IsNaN(t.Low) {
		text = append(text, "lots without a time have no place in the run: they are in no control limit")
	}
	return text
}

// timed counts the lots that control limits can rest on.
func timed(t *Trend) int {
	n := 0
	for _, l := range t.Lots {
		if l.At != "" && !math.IsNaN(l.Centre) {
			n++
		}
	}
	return n
}

// overall asks whether all lots are alike, by Welch's analysis of variance, or by
// ranks where devices never reach the current.
func (r *run) overall() (string, bool) {
	var groups [][]float64
	endless := false
	for _, l := range r.lots {
		if len(l.v.x) >= 2 {
			groups = append(groups, l.v.x)
		}
		endless = endless || l.v.counts.Above > 0
	}
	if len(groups) < 2 {
		return "", false
	}
	name, p := "Welch's analysis of variance", stats.WelchOneWay(groups).P
	if endless || math.IsNaN(p) {
		name, p = "ranks, Kruskal and Wallis", stats.KruskalWallis(groups).P
	}
	if math.IsNaN(p) {
		return "", false
	}
	if p <= 1-r.opt.Level {
		return fmt.Sprintf("the %d lots are not all alike (%s, %s, scatter of the devices alone)", len(groups), name, pWords(p)), true
	}
	return fmt.Sprintf("nothing shows that the %d lots differ (%s, %s)", len(groups), name, pWords(p)), true
}

// missing reports whether what some pair does not share is not known.
func (r *run) missing() bool {
	for i := range r.lots {
		for j := range i {
			if s := sharedOf(r.lots[j].sharing, r.lots[i].sharing); s.missing {
				return true
			}
		}
	}
	return false
}
