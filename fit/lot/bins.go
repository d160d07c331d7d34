package lot

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// The ways in which [SortInto] can be used wrongly.
var (
	ErrSortChoice   = errors.New("exactly one of width, edges and number of bins is needed")
	ErrSortQuantity = errors.New("not a quantity that devices are sorted by")
	ErrWidth        = errors.New("bin width is not a number above 0")
	ErrEdges        = errors.New("edges are not two or more ascending numbers")
	ErrBinCount     = errors.New("number of bins out of range")
)

// mostBins keeps a width given in the wrong unit from filling the memory.
const mostBins = 10_000

// SortInto puts the devices of a lot in bins by one quantity.
//
// Inputs: the devices in the order given, not modified. Result: every device is in
// exactly one bin or in Unsorted with the reason: dead, above the current, no
// value, outside the edges, control part, excluded. A device within 2u of an edge
// stays in its bin and Maybe names the bin across. Errors: [ErrSortChoice],
// [ErrSortQuantity], [ErrWidth], [ErrEdges], [ErrBinCount]. Warnings: bins
// narrower than 4u or than the step of the readings; no u known. Source: rule of
// 2u and width of 4u, common practice, no source. Checked: TestSortExactEdges,
// TestSortPartition.
func SortInto(devs []Device, opt SortOptions) (Sorting, error) {
	s := Sorting{By: opt.By}
	if err := opt.check(); err != nil {
		return s, err
	}
	s.SmallestWidth = smallestWidth(devs, opt.By)
	why := make([]string, len(devs)) // in no bin
	var placed []placing
	for i := range devs {
		why[i] = whyUnsorted(&devs[i], opt.By)
		if why[i] == "" {
			q := devs[i].Result.At(opt.By)
			placed = append(placed, placing{Placed{Name: devs[i].Name, Value: q.Value, U: q.U}, i})
		}
	}
	slices.SortStableFunc(placed, func(a, b placing) int { return cmp.Compare(a.Value, b.Value) })
	g, err := gridOf(placed, &opt)
	if err != nil {
		return s, err
	}
	s.Bins = g.empty()
	for _, p := range placed {
		at := g.bin(p.Value)
		if at < 0 || at >= len(s.Bins) {
			why[p.index] = g.whyOutside(p.Placed, opt.By)
			continue
		}
		p.Maybe = g.across(p.Placed, at)
		s.Bins[at].Devices = append(s.Bins[at].Devices, p.Placed)
	}
	for i, w := range why {
		if w != "" {
			s.Unsorted = append(s.Unsorted, Unsorted{devs[i].Name, w})
		}
	}
	s.Warnings = append(sortWarnings(&s, placed, g), rangeEdges(devs, opt.By)...)
	return s, nil
}

// placing is a device on its way to a bin.
type placing struct {
	Placed
	index int
}

func (opt *SortOptions) check() error {
	chosen := 0
	for _, yes := range []bool{opt.Width != 0, opt.Edges != nil, opt.Bins != 0} {
		if yes {
			chosen++
		}
	}
	if chosen != 1 {
		return ErrSortChoice
	}
	if (&fit.Result{}).At(opt.By) == nil {
		return fmt.Errorf("%q: %w", opt.By, ErrSortQuantity)
	}
	if opt.Width != 0 && !(opt.Width > 0 && !math.IsInf(opt.Width, 0)) {
		return fmt.Errorf("%v: %w", opt.Width, ErrWidth)
	}
	if opt.Bins < 0 || opt.Bins > mostBins {
		return fmt.Errorf("%d, allowed are 1 to %d: %w", opt.Bins, mostBins, ErrBinCount)
	}
	if opt.Edges != nil {
		if len(opt.Edges) < 2 {
			return ErrEdges
		}
		for i, e := range opt.Edges {
			if math.IsNaN(e) || math.IsInf(e, 0) || i > 0 && !(e > opt.Edges[i-1]) {
				return fmt.Errorf("edge %d, %v: %w", i+1, e, ErrEdges)
			}
		}
	}
	return nil
}

// whyUnsorted says why a device can be in no bin, "" when it can.
func whyUnsorted(d *Device, by fit.Key) string {
	r := &d.Result
	switch {
	case r.State == fit.Excluded:
		return orElse(r.Why, "excluded")
	case d.Control:
		return "control part"
	case r.State == fit.Declined:
		return orElse(r.Why, "the readings give no number that may be believed")
	case stateReasons[r.State].Code != "" && r.State != fit.Above:
		return orElse(r.Why, stateReasons[r.State].Text)
	}
	q := r.At(by)
	if !math.IsNaN(q.Value) && !math.IsInf(q.Value, 0) {
		return ""
	}
	if r.State == fit.Above || r.Has(fit.CodeAboveRange) {
		return orElse(r.Why, orElse(warned(r, fit.CodeAboveRange), stateReasons[fit.Above].Text))
	}
	return fmt.Sprintf("no %s could be had", NameOf(by))
}

func orElse(text, other string) string {
	if text != "" {
		return text
	}
	return other
}

// smallestWidth is four times the median uncertainty of the devices that can be
// sorted, NaN where none is known: narrower bins sort the noise.
func smallestWidth(devs []Device, by fit.Key) float64 {
	var u []float64
	for i := range devs {
		if q := devs[i].Result.At(by); q.U > 0 && !math.IsInf(q.U, 0) && whyUnsorted(&devs[i], by) == "" {
			u = append(u, q.U)
		}
	}
	return 4 * stats.Median(u)
}

// grid is the edges of the bins.
type grid struct {
	edges  []float64
	width  float64 // above 0: edges are whole multiples of it, the first is origin
	origin float64 // multiple at the first edge
	closed bool    // the last edge belongs to the last bin
	slack  float64
	given  bool // edges were given: what is outside is unsorted
}

// sameAs is the fraction of a bin's width within which numbers count as equal: far
// above what arithmetic spoils, far below what any meter shows.
const sameAs = 1e-9

func gridOf(placed []placing, opt *SortOptions) (grid, error) {
	switch {
	case opt.Edges != nil:
		g := grid{edges: slices.Clone(opt.Edges), closed: true, given: true}
		g.slack = sameAs * g.narrowest()
		return g, nil
	case len(placed) == 0:
		return grid{}, nil
	case opt.Width > 0:
		return byWidth(placed, opt.Width)
	}
	return byNumber(placed[0].Value, placed[len(placed)-1].Value, opt.Bins), nil
}

// byWidth lays bins over the devices and, where a device may belong beyond the
// first or last of them, over its neighbour, so that it has a name.
func byWidth(placed []placing, width float64) (grid, error) {
	g := grid{width: width, slack: sameAs * width}
	first, last := math.Inf(1), math.Inf(-1)
	for _, p := range placed {
		at := g.multiple(p.Value)
		first, last = math.Min(first, at), math.Max(last, at)
		if p.U > 0 && !math.IsInf(p.U, 0) {
			if p.Value-at*width <= 2*p.U+g.slack {
				first = math.Min(first, at-1)
			}
			if (at+1)*width-p.Value <= 2*p.U+g.slack {
				last = math.Max(last, at+1)
			}
		}
	}
	if math.Max(math.Abs(first), math.Abs(last)) > 1e12 {
		return g, fmt.Errorf("width %s against values of %s: %w", short(width), short(placed[0].Value), ErrWidth)
	}
	if n := last - first + 1; !(n <= mostBins) {
		return g, fmt.Errorf("width %s makes %.3g bins, at most %d are allowed: %w", short(width), n, mostBins, ErrBinCount)
	}
	g.origin = first
	for at := first; at <= last+1; at++ {
		g.edges = append(g.edges, clean(at*width))
	}
	return g, nil
}

// multiple is the whole number of widths at or below v.
func (g *grid) multiple(v float64) float64 {
	q := v / g.width
	return math.Floor(q + math.Max(sameAs, 1e-15*math.Abs(q)))
}

// clean takes the last digits off that multiplication has spoiled: 56 × 0.05 is
// 2.8.
func clean(x float64) float64 {
	c, err := strconv.ParseFloat(strconv.FormatFloat(x, 'g', 14, 64), 64)
	if err != nil {
		return x
	}
	return c
}

func byNumber(low, high float64, n int) grid {
	if low == high {
		return grid{edges: []float64{low, high}, closed: true}
	}
	g := grid{closed: true}
	for i := 0; i < n; i++ {
		at := float64(i) / float64(n)
		g.edges = append(g.edges, low*(1-at)+high*at)
	}
	g.edges = append(g.edges, high)
	g.slack = sameAs * g.narrowest()
	return g
}

func (g *grid) narrowest() float64 {
	w := math.Inf(1)
	for i := 1; i < len(g.edges); i++ {
		w = math.Min(w, g.edges[i]-g.edges[i-1])
	}
	return w
}

// empty makes the bins with nothing in them.
func (g *grid) empty() []Bin {
	var bins []Bin
	for i := 1; i < len(g.edges); i++ {
		bins = append(bins, Bin{Name: binName(i - 1), Low: g.edges[i-1], High: g.edges[i]})
	}
	return bins
}

// bin is the index of the bin that v lies in; out of range where there is none.
func (g *grid) bin(v float64) int {
	if g.width > 0 {
		return int(g.multiple(v) - g.origin)
	}
	last := len(g.edges) - 1
	if g.closed && v >= g.edges[last]-g.slack && v <= g.edges[last]+g.slack {
		return last - 1
	}
	at, _ := slices.BinarySearchFunc(g.edges, v, func(e, v float64) int {
		if e-g.slack <= v {
			return -1
		}
		return 1
	})
	return at - 1
}

// across names the bin beyond the nearest edge when that edge is within 2u.
func (g *grid) across(p Placed, at int) string {
	if !(p.U > 0) || math.IsInf(p.U, 0) {
		return ""
	}
	toLow, toHigh := p.Value-g.edges[at], g.edges[at+1]-p.Value
	gap, other := toLow, at-1
	if toHigh < toLow {
		gap, other = toHigh, at+1
	}
	if gap > 2*p.U+g.slack {
		return ""
	}
	if other >= 0 && other < len(g.edges)-1 {
		return binName(other)
	}
	if g.given {
		return OutsideEdges
	}
	// The outer edges of bins by number are devices of the lot: none is across.
	return g.acrossInner(p, at)
}

// acrossInner is across for an outermost bin whose outer edge leads nowhere.
func (g *grid) acrossInner(p Placed, at int) string {
	switch {
	case at > 0 && p.Value-g.edges[at] <= 2*p.U+g.slack:
		return binName(at - 1)
	case at+2 < len(g.edges) && g.edges[at+1]-p.Value <= 2*p.U+g.slack:
		return binName(at + 1)
	}
	return ""
}

func (g *grid) whyOutside(p Placed, by fit.Key) string {
	low, high := g.edges[0], g.edges[len(g.edges)-1]
	text, off := fmt.Sprintf("%s is below the first edge of %s", show(by, p.Value), show(by, low)), low-p.Value
	if p.Value > high {
		text, off = fmt.Sprintf("%s is above the last edge of %s", show(by, p.Value), show(by, high)), p.Value-high
	}
	if off <= 2*p.U {
		text += ", by no more than its uncertainty (2u)"
	}
	return text
}

// binName counts A, B, ... Z, AA, AB, ...
func binName(i int) string {
	name := ""
	for i++; i > 0; i = (i - 1) / 26 {
		name = string(rune('A'+(i-1)%26)) + name
	}
	return name
}

// sortWarnings says where the bins are finer than the readings.
func sortWarnings(s *Sorting, placed []placing, g grid) []fit.Warning {
	var out []fit.Warning
	if len(placed) == 0 {
		return nil
	}
	width := g.narrowest()
	if g.width > 0 {
		width = g.width
	}
	if width == 0 {
		return []fit.Warning{{Code: fit.CodeBenchLimited, Text: "all devices read the same: one bin holds them all"}}
	}
	values := make([]float64, len(placed))
	for i, p := range placed {
		values[i] = p.Value
	}
	step := StepOf(values)
	switch {
	case math.IsNaN(s.SmallestWidth):
		out = append(out, fit.Warning{Code: fit.CodeNoAccuracy, Text: "no uncertainty is known: which devices may belong in the next bin cannot be said"})
	case width < s.SmallestWidth*(1-sameAs):
		out = append(out, fit.Warning{Code: fit.CodeBenchLimited, Text: fmt.Sprintf(
			"bins %s wide are narrower than the smallest honest width of %s (4u)", difference(s.By, width), difference(s.By, s.SmallestWidth))})
	}
	if width < step*(1-sameAs) {
		out = append(out, fit.Warning{Code: fit.CodeBenchLimited, Text: fmt.Sprintf(
			"bins %s wide are narrower than the step of the readings, %s", difference(s.By, width), difference(s.By, step))})
	}
	return out
}

// difference writes a difference of two values of a quantity.
func difference(k fit.Key, d float64) string {
	switch k {
	case fit.KeyVgsth, fit.KeyVgsIdle, fit.KeyVt:
		return millivolts(d)
	}
	return show(k, d)
}
