package gauge

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"time"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// HistoryOptions are the choices of [HistoryOf].
type HistoryOptions struct {
	Tempco float64       // V/K, of the quantity; NaN: none
	Known  Repeatability // of this bench; not [Repeatability.Enough]: taken from the differences
}

const (
	// oneInTwoU is the probability of a normal value beyond two standard deviations:
	// the limit for one device is 2·√2·sigma, and that for n has the same
	// probability over all of them.
	oneInTwoU = 0.0455
	// fewestChanged is how many devices must have been measured at both occasions
	// before their median change says something of the bench.
	fewestChanged = 4
	// fewestForTwo is from how many on two of them that moved (exchanged, say) are
	// looked for at once, by one another.
	fewestForTwo = 8
)

// HistoryOf compares for each device its last occasion with its first, devices
// with the same two occasions together, the largest group first.
//
// Where who measured, or in which fixture, is known of both occasions, like is compared
// with like: of each device only what the same operator read in the same fixture at
// both, each of several with equal weight. Where none did at both, that is said, and
// what is common to all may be theirs.
//
// The change common to all is the median; its interval rests on the order of the
// changes. Corrected: value - tempco·(T - T first), by each device's own
// temperatures. FromDiffs: 1.4826 × MAD of the changes about their median, over √2.
// Limits for a device's own change (less the median): 2·√2·sigma for one alone,
// t·√2·sigma with the probability of 4.55 % divided by the number of devices for
// all of them, where sigma is known from a study; where the values are means
// of several insertions, smaller by so much. Otherwise the devices judge one another: those beyond by the
// generalised extreme studentised deviate test at 4.55 % are changed, and the limit
// is that of a prediction from the others, t·s·√(1 + 1/n).
//
// Of sets in which nothing moved 4 to 7 % name a device, of 5 to 40 devices (simulated).
//
// Controls count like others. Source: Bonferroni's correction; Rosner
// (1983), see [stats.GeneralizedESD]. Checked: TestHistoryHalfAYear,
// TestHistoryLimit, TestHistoryFalseAlarms, TestHistoryByOperators.
func HistoryOf(ms []Measuring, o HistoryOptions) []History {
	ms = withValue(ms)
	slices.SortStableFunc(ms, func(a, b Measuring) int { return cmp.Compare(a.Rank, b.Rank) })
	rank := map[string]int{} // of the occasions
	byDevice := map[string][]Measuring{}
	var names []string
	for _, m := range ms {
		if _, ok := rank[m.Occasion]; !ok {
			rank[m.Occasion] = len(rank)
		}
		if _, ok := byDevice[m.Device]; !ok {
			names = append(names, m.Device)
		}
		byDevice[m.Device] = append(byDevice[m.Device], m)
	}
	if len(rank) < 2 {
		return nil
	}
	type pair struct{ from, to string }
	groups := map[pair]*History{}
	weights := map[pair][]float64{}
	var order []pair
	for _, n := range names {
		list := byDevice[n]
		p := pair{list[0].Occasion, list[len(list)-1].Occasion}
		if p.from == p.to {
			continue
		}
		h := groups[p]
		if h == nil {
			h = &History{From: newOccasion(p.from), To: newOccasion(p.to), Days: daysBetween(p.from, p.to), Tempco: o.Tempco}
			groups[p] = h
			order = append(order, p)
		}
		c, weight := changeOf(list, p.from, p.to, h, o.Tempco)
		c.Device, c.Control = n, list[0].Control
		h.Changes = append(h.Changes, c)
		weights[p] = append(weights[p], weight)
	}
	slices.SortStableFunc(order, func(a, b pair) int { return cmp.Compare(len(groups[b].Changes), len(groups[a].Changes)) })
	var out []History
	for _, p := range order {
		h := groups[p]
		h.judge(o.Known, weights[p])
		h.say()
		out = append(out, *h)
	}
	return out
}

func newOccasion(name string) Occasion { return Occasion{name, math.NaN(), math.NaN()} }

// daysBetween is the time between two dates in days, NaN where one is none.
func daysBetween(from, to string) float64 {
	a, err := time.Parse(time.DateOnly, from)
	b, err2 := time.Parse(time.DateOnly, to)
	if err != nil || err2 != nil {
		return math.NaN()
	}
	return b.Sub(a).Hours() / 24
}

// take widens the temperatures of an occasion.
func (o *Occasion) take(t float64) {
	if math.IsNaN(t) {
		return
	}
	if !(o.TempLow <= t) {
		o.TempLow = t
	}
	if !(o.TempTop >= t) {
		o.TempTop = t
	}
}

// changeOf is the change of one device; weight is the variance of the change in
// units of that between two single insertions.
func changeOf(list []Measuring, from, to string, h *History, tempco float64) (c Change, weight float64) {
	var at [2][]Measuring
	for _, m := range list {
		switch m.Occasion {
		case to:
			at[1] = append(at[1], m)
			h.To.take(m.Temp)
		case from:
			at[0] = append(at[0], m)
			h.From.take(m.Temp)
		}
	}
	groups := h.likeWithLike(at)
	of := float64(len(groups))
	var mean, temp [2]float64
	for _, g := range groups {
		for k, list := range g {
			n, value, degrees := float64(len(list)), 0.0, 0.0
			for _, m := range list {
				value, degrees = value+m.Value, degrees+m.Temp
			}
			mean[k], temp[k] = mean[k]+value/n/of, temp[k]+degrees/n/of
			weight += 1 / n / (of * of) / 2
		}
	}
	c.First, c.Last = mean[0], mean[1]
	c.Raw = c.Last - c.First
	c.Corrected = c.Raw - tempco*(temp[1]-temp[0])
	return c, weight
}

// judge works out what is common to all and which device moved by itself.
func (h *History) judge(known Repeatability, weights []float64) {
	n := len(h.Changes)
	weight := stats.Mean(weights)
	raw, corrected := make([]float64, n), make([]float64, n)
	for i, c := range h.Changes {
		raw[i], corrected[i] = c.Raw, c.Corrected
	}
	base := raw
	h.Corrected = noEstimate()
	if !slices.ContainsFunc(corrected, math.IsNaN) {
		h.Corrected = medianOf(corrected, known, weight)
		base = corrected
	}
	h.Raw = medianOf(raw, known, weight)
	h.FromDiffs, h.Sigma, h.SigmaDF, h.Limit, h.LimitOne = math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN()
	common := 0.0 // fewer devices cannot tell their own change from the bench's
	if n >= fewestChanged {
		common = stats.Median(base)
		h.FromDiffs = stats.MAD(base) * madToSD / math.Sqrt(2*weight)
	}
	own := make([]float64, n)
	for i := range h.Changes {
		own[i] = base[i] - common
		h.Changes[i].Own = own[i]
	}
	switch {
	case known.Value > 0 && known.DF > 0:
		h.Sigma, h.SigmaDF, h.SigmaBasis = known.Value, known.DF, known.Basis
		limit := limitFor(n, known.Value, known.DF)
		for i := range h.Changes {
			h.Changes[i].Changed = math.Abs(own[i]) > limit*math.Sqrt(weights[i])
		}
		h.Limit, h.LimitOne = limit*math.Sqrt(weight), 2*math.Sqrt(2*weight)*known.Value
	case n >= fewestChanged+1 && h.FromDiffs >= 0:
		h.Sigma, h.SigmaBasis = h.FromDiffs, "differences of "+count(n, "device")
		h.LimitOne = 2 * math.Sqrt(2*weight) * h.Sigma
		h.byOneAnother(own)
	}
}

// madToSD makes a standard deviation of the median absolute deviation of normal
// values.
const madToSD = 1.4826

// limitFor is the limit for the changes of n devices together, from a known
// repeatability: √2·sigma·t, each side of each device with its share of 4.55 %.
func limitFor(n int, sigma, df float64) float64 {
	p := oneInTwoU / float64(2*n)
	t := -stats.NormalQuantile(p)
	if !math.IsInf(df, 1) {
		t = stats.UpperT(p, df)
	}
	return t * sqrt2 * sigma
}

// byOneAnother finds devices that moved by what the changes of the others say.
func (h *History) byOneAnother(own []float64) {
	// More sought at once would be found too often among few: see the test.
	most := max(2, len(own)/6)
	if len(own) < fewestForTwo {
		most = 1
	}
	esd := stats.GeneralizedESD(own, oneInTwoU, most)
	odd := map[int]bool{}
	for _, i := range esd.Removed[:esd.Count] {
		odd[i] = true
		h.Changes[i].Changed = true
	}
	var rest []float64
	for i, x := range own {
		if !odd[i] {
			rest = append(rest, x)
		}
	}
	n := float64(len(rest))
	h.SigmaDF = n - 1
	h.Limit = stats.UpperT(oneInTwoU/float64(2*len(own)), n-1) * stats.SD(rest) * math.Sqrt(1+1/n)
}

// medianOf is the median with its interval: from the repeatability where that is
// known (its standard error √(π/2) times that of the mean), else by order statistics
// and of at least 95 %. weight is the variance of a change in units of that between
// two single insertions.
func medianOf(x []float64, known Repeatability, weight float64) Estimate {
	s := stats.Sorted(x)
	if known.Value > 0 && known.DF > 0 {
		m := stats.MedianSorted(s)
		t := z95
		if !math.IsInf(known.DF, 1) {
			t = stats.UpperT((1-level)/2, known.DF)
		}
		reach := t * math.Sqrt(math.Pi/2) * known.Value * math.Sqrt(2*weight/float64(len(s)))
		return Estimate{Value: m, Low: m - reach, High: m + reach, DF: known.DF}
	}
	e := Estimate{Value: stats.MedianSorted(s), Low: math.NaN(), High: math.NaN(), DF: float64(len(s) - 1)}
	// P(fewer than k of n below the median), by the binomial distribution with 1/2.
	n, k := len(s), 0
	p := math.Pow(0.5, float64(n))
	for below := p; below <= (1-level)/2; k++ {
		p *= float64(n-k) / float64(k+1)
		below += p
	}
	if k > 0 {
		e.Low, e.High = s[k-1], s[n-k]
	}
	return e
}

// Moved reports whether all devices moved together by more than 0, after the
// temperature where that is known.
func (h *History) Moved() bool {
	e := h.Raw
	if !math.IsNaN(h.Corrected.Value) {
		e = h.Corrected
	}
	return len(h.Changes) >= fewestChanged && (e.Low > 0 || e.High < 0)
}

// ChangedDevices names the devices that moved by themselves.
func (h *History) ChangedDevices() []string {
	var out []string
	for _, c := range h.Changes {
		if c.Changed {
			out = append(out, c.Device)
		}
	}
	return out
}

// Of says in one sentence what became of one device, "" where it is not among
// them.
func (h *History) Of(device string) string {
	for _, c := range h.Changes {
		switch {
		case c.Device != device:
			continue
		case math.IsNaN(h.Limit):
			return fmt.Sprintf("from %s to %s %s; too few devices or readings to tell whether that is its own", h.From.Name, h.To.Name, signed(c.Raw))
		case c.Changed:
			return fmt.Sprintf("from %s to %s it moved by %s besides what is common to the %d devices measured at both (limit %s): changed or mixed up: check the serial, measure again",
				h.From.Name, h.To.Name, signed(c.Own), len(h.Changes), volts(h.Limit))
		default:
			return fmt.Sprintf("from %s to %s it moved by %s besides what is common to the %d devices measured at both, within the limit of %s",
				h.From.Name, h.To.Name, signed(c.Own), len(h.Changes), volts(h.Limit))
		}
	}
	return ""
}

// say words the history.
func (h *History) say() {
	raw := signed(h.Raw.Value) + between(h.Raw)
	add := func(format string, args ...any) { h.Texts = append(h.Texts, fmt.Sprintf(format, args...)) }
	n := len(h.Changes)
	if n < fewestChanged {
		add("%s measured at both dates: too few to tell the bench's change from their own, %d are needed", count(n, "device"), fewestChanged)
	}
	warmer := h.To.TempLow - h.From.TempTop
	switch {
	case n < fewestChanged:
	case !math.IsNaN(h.Corrected.Value) && !h.Moved():
		add("all together: %s as read, %s%s after %s: the temperature, not the parts", signed(h.Raw.Value), signed(h.Corrected.Value), between(h.Corrected), h.coefficient())
	case !math.IsNaN(h.Corrected.Value):
		add("all together: %s as read, %s%s after %s: common to all, so the bench%s or the coefficient, not the parts", signed(h.Raw.Value), signed(h.Corrected.Value), between(h.Corrected), h.coefficient(), h.orWho())
	case h.Moved():
		add("all together: %s: common to all, so the bench%s or the temperature, not the parts", raw, h.orWho())
	default:
		add("all together: %s, no more than chance", raw)
	}
	h.Texts = append(h.Texts, h.whoWords()...)
	if math.IsNaN(h.Corrected.Value) {
		switch {
		case !math.IsNaN(h.Tempco):
			add("not corrected for temperature: that of some readings is not known")
		case math.IsNaN(h.From.TempLow) || math.IsNaN(h.To.TempLow):
			add("temperatures are not all known; a power part changes by some " + fit.UsualSlope)
		case math.Abs(warmer) >= 0.5:
			add("measured at other temperatures, and not corrected: give the coefficient of the part, for instance --tempco -4mV/K")
		}
	}
}

// between writes the interval of an estimate in brackets.
func between(e Estimate) string {
	if math.IsNaN(e.Low) || math.IsNaN(e.High) {
		return ""
	}
	return fmt.Sprintf(" (95 %%: %s to %s)", signed(e.Low), signed(e.High))
}

func (h *History) coefficient() string {
	return fmt.Sprintf("%s/K", volts(h.Tempco))
}
