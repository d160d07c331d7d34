package gauge

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit"
	"gatesill/fit/stats"
)

var sqrt2, z95 = math.Sqrt2, stats.NormalQuantile(0.975)

// level is that of all intervals.
const level = 0.95

// StudyOf says how well one device reads the same when it is put in again.
//
// Repeatability: within devices and sittings, sigma² = Σ(y - mean of device and
// sitting)² / Σ(n - 1), interval by chi-square. Operators, fixtures, sittings:
// see [factors]. Devices that scatter far beyond the others (see [uneven]) are left out
// of all but the order, and named. The lot: s² of the means of the devices less sigma²/n, n the
// harmonic mean of their numbers of measurings. Share: sigma over the whole
// spread of single readings, √(lot² + sigma²), its interval from that of the ratio
// of the two variances (F). Categories: the whole number below √2 × lot over the
// measuring's sd, operators and fixtures included.
//
// Inputs: measurings in any order, not modified; those without a value are left
// out, control parts count for the repeatability but not for the lot. tempco, V/K (NaN:
// none): before operators, fixtures and sittings are compared, all values are brought to
// the temperature of the first, where all are known. Result: NaN
// where there are no two measurings of a device in one sitting. Source:
// repeatability and reproducibility by analysis of variance, ISO 5725-2, and the
// number of categories of measurement system studies (both from memory). Checked:
// TestStudyByHand, TestStudyIntervals, TestStudyShift.
func StudyOf(ms []Measuring, tempco float64) Study {
	ms = withValue(ms)
	all := ms
	s := Study{Categories: -1, SharedBy: math.NaN(), Lot: noEstimate(), Share: noEstimate()}
	cells := cellsOf(ms)
	s.Whole = repeatability(cells)
	s.Repeatability = s.Whole
	odd, rest := uneven(cells)
	if without := repeatability(rest); len(odd) > 0 && without.DF > 0 {
		s.Repeatability, s.Odd = without, odd
		s.Repeatability.Basis = fmt.Sprintf("%s, %d times in all, less the worst of %s", count(without.Devices, "device"), without.Measurings, oddWords(odd))
		ms = among(ms, rest)
		cells = rest
	}
	r := &s.Repeatability
	if r.DF > 0 {
		s.MoreDevices = max(0, FewestDevices-r.Devices)
		s.MoreRepeats = max(0, FewestDF-int(r.DF)-s.MoreDevices)
	}
	s.Factors = factors(ms, cells)
	apart, known := warmth(ms)
	if corrected, ok := brought(ms, tempco); ok {
		s.Factors = factors(corrected, cellsOf(corrected))
		s.AtOneTemp, apart = true, 0
	} else if !known {
		apart = math.NaN()
	}
	s.TempsApart = apart
	for i, f := range s.Factors {
		// Of two that cannot be told apart the first stands for both.
		if f.Name != "session" && f.SD.Value > 0 && (f.With == "" || i == 0) {
			r.Across = math.Hypot(r.Across, f.SD.Value)
		}
	}
	s.kept = ms
	s.theLot(ms)
	s.Order = orderOf(all)
	s.warn(ms)
	return s
}

func noEstimate() Estimate {
	return Estimate{math.NaN(), math.NaN(), math.NaN(), math.NaN()}
}

func withValue(ms []Measuring) []Measuring {
	var out []Measuring
	for _, m := range ms {
		if !math.IsNaN(m.Value) && !math.IsInf(m.Value, 0) {
			out = append(out, m)
		}
	}
	return out
}

// cell is one device in one sitting.
type cell struct {
	device, sitting string
	values          []float64
}

// cellsOf gathers the measurings by device and sitting, in order of the first of
// each.
func cellsOf(ms []Measuring) []cell {
	type key struct{ device, sitting string }
	at := map[key]int{}
	var cells []cell
	for _, m := range ms {
		k := key{m.Device, m.Sitting}
		i, ok := at[k]
		if !ok {
			i = len(cells)
			at[k] = i
			cells = append(cells, cell{device: m.Device, sitting: m.Sitting})
		}
		cells[i].values = append(cells[i].values, m.Value)
	}
	return cells
}

// squares is the sum of squares of a cell about its mean.
func (c *cell) squares() float64 {
	n := len(c.values)
	if n < 2 {
		return 0
	}
	sd := stats.SD(c.values)
	return sd * sd * float64(n-1)
}

// repeatability pools the scatter within the cells.
func repeatability(cells []cell) Repeatability {
	r := Repeatability{Estimate: noEstimate()}
	devices := map[string]bool{}
	sum, df, even := 0.0, 0, true
	for i := range cells {
		n := len(cells[i].values)
		if n < 2 {
			continue
		}
		sum += cells[i].squares()
		df += n - 1
		devices[cells[i].device] = true
		r.Measurings += n
		even = even && (r.Rounds == 0 || r.Rounds == n)
		r.Rounds = max(r.Rounds, n)
	}
	r.Devices = len(devices)
	r.DF = float64(df)
	if df == 0 {
		return r
	}
	r.Estimate = sdOf(sum/float64(df), float64(df))
	r.Across = r.Value
	times := r.Devices * r.Rounds
	switch {
	case even && r.Measurings == times:
		r.Basis = fmt.Sprintf("%s x %d", count(r.Devices, "device"), r.Rounds)
	case even && r.Measurings%times == 0:
		r.Basis = fmt.Sprintf("%s x %d in %d sessions", count(r.Devices, "device"), r.Rounds, r.Measurings/times)
	default:
		r.Basis = fmt.Sprintf("%s, %d times in all", count(r.Devices, "device"), r.Measurings)
	}
	return r
}

// sdOf is the standard deviation of a variance with its interval by chi-square.
func sdOf(variance, df float64) Estimate {
	e := Estimate{Value: math.Sqrt(variance), Low: math.NaN(), High: math.NaN(), DF: df}
	if df > 0 {
		e.Low = math.Sqrt(variance * df / stats.ChiSquareQuantile((1+level)/2, df))
		e.High = math.Sqrt(variance * df / stats.ChiSquareQuantile((1-level)/2, df))
	}
	return e
}

// theLot fills what the lot's own spread says beside the bench's.
func (s *Study) theLot(ms []Measuring) {
	byDevice := map[string][]float64{}
	var names []string
	for _, m := range ms {
		if m.Control {
			continue
		}
		if _, ok := byDevice[m.Device]; !ok {
			names = append(names, m.Device)
		}
		byDevice[m.Device] = append(byDevice[m.Device], m.Value)
	}
	s.LotDevices = len(names)
	r := s.Repeatability.Value
	if len(names) < 3 || !(r > 0) {
		return
	}
	var means []float64
	inverse := 0.0
	for _, n := range names {
		means = append(means, stats.Mean(byDevice[n]))
		inverse += 1 / float64(len(byDevice[n]))
	}
	inverse /= float64(len(names)) // 1 / harmonic mean of the numbers of measurings
	df, rdf := float64(len(names)-1), s.Repeatability.DF
	seen := stats.SD(means)
	own := math.Max(0, seen*seen-r*r*inverse)
	bare := sdOf(seen*seen, df)
	without := func(sd float64) float64 { return math.Sqrt(math.Max(0, sd*sd-r*r*inverse)) }
	s.Lot = Estimate{Value: math.Sqrt(own), DF: df, Low: without(bare.Low), High: without(bare.High)}
	// share of the variances: seen²/r² is lot²/r² + 1/n, distributed as F.
	share := func(ratio float64) float64 {
		return 1 / math.Sqrt(1+math.Max(0, ratio-inverse))
	}
	ratio := seen * seen / (r * r)
	s.Share = Estimate{
		Value: share(ratio), DF: rdf,
		Low:  share(ratio / stats.FQuantile((1-level)/2, df, rdf)),
		High: share(ratio / stats.FQuantile((1+level)/2, df, rdf)),
	}
	all := s.Repeatability.Across * s.Repeatability.Across
	if all > r*r {
		s.SharedBy = math.Sqrt(all / (all + own))
	}
	s.Categories = int(math.Sqrt(2 * own / all))
}

// warn says what a reader of the study must know.
func (s *Study) warn(ms []Measuring) {
	r := s.Repeatability
	if r.DF > 0 && (r.Devices < FewestDevices || r.DF < FewestDF) {
		s.add(fit.CodeTooFewRepeats, "too few to tell: %s put in again %s beyond the first, %d and %d are needed; %s",
			count(r.Devices, "device"), count(int(r.DF), "time"), FewestDevices, FewestDF, s.more())
	}
	if s.Order.Known && !s.Order.Random {
		s.add(fit.CodeOrderNotRandom, "%s", s.Order.Text)
	}
	if len(s.Odd) > 0 {
		s.add(fit.CodeUnevenRepeats, "%s: more scatter than chance lets one device of these have: a bad contact, or another device at one of its turns; left out, the repeatability is %s instead of %s",
			oddWords(s.Odd), volts(r.Value), volts(s.Whole.Value))
	}
	if own := medianU(ms); r.DF > 0 && own > 0 && r.Value < own {
		s.add(fit.CodeBenchLimited, "the readings repeat to %s, less than their own uncertainty of %s: the step of the display hides the repeatability", volts(r.Value), volts(own))
	}
	for _, f := range s.Factors {
		if f.P < 1-level && f.Name != "session" {
			s.add(fit.CodeOperatorsDiffer, "%ss do not read the same (sd %s, p %s)%s", f.Name, volts(f.SD.Value), pWords(f.P), f.withWords()+s.warmWords())
		}
	}
	if s.Repeatability.Enough() && s.Share.Low > tenth {
		s.add(fit.CodeBenchCoarse, "what the bench repeats to is %.0f %% of the spread of the lot (%.0f to %.0f %%), more than a tenth: sorting finely needs each device measured several times", 100*s.Share.Value, 100*s.Share.Low, 100*s.Share.High)
	}
}

// tenth is the share of the lot's spread below which a bench does not blur it
// (common practice, no source).
const tenth = 0.10

// more says what to measure before the study is enough.
func (s *Study) more() string {
	switch {
	case s.MoreDevices > 0 && s.MoreRepeats > 0:
		return fmt.Sprintf("put %s more in again, and measure %s more", count(s.MoreDevices, "device"), count(s.MoreRepeats, "time"))
	case s.MoreDevices > 0:
		return fmt.Sprintf("put %s more in again", count(s.MoreDevices, "device"))
	}
	return fmt.Sprintf("put devices in again %s more", count(s.MoreRepeats, "time"))
}

func (s *Study) add(code, format string, args ...any) {
	s.Warnings = append(s.Warnings, fit.Warning{Code: code, Text: fmt.Sprintf(format, args...)})
}

// uneven parts devices in a sitting whose scatter is more than chance allows beside
// that of the others from the rest. The one with the greatest mean square is taken
// out, then the next, up to a fifth of them and two at least; each is tested against
// those then left, as F at 1 % over their number, and all up to the last that exceeds
// it are odd: two exchanged devices would hide each other otherwise.
//
// Source: the idea of Cochran's test of the largest variance (Annals of Eugenics 11
// (1941) 47-52), with Rosner's order of steps (both from memory). Checked: TestUneven,
// TestExchanged.
func uneven(cells []cell) (odd []string, rest []cell) {
	rest = cells
	left, peeled := slices.Clone(cells), []string(nil)
	for range max(2, len(cells)/5) {
		at, p := worst(left)
		if at < 0 {
			break
		}
		if !slices.Contains(peeled, left[at].device) {
			peeled = append(peeled, left[at].device)
		}
		left = slices.Delete(left, at, at+1)
		if p < 0.01 {
			odd, rest = slices.Clone(peeled), slices.Clone(left)
		}
	}
	return odd, rest
}

// worst is the index of the cell with the greatest mean square, and the probability
// of one so great among as many; -1 where there is none to compare it with.
func worst(cells []cell) (at int, p float64) {
	total, df, groups, most := 0.0, 0, 0, 0.0
	at = -1
	for i := range cells {
		d := len(cells[i].values) - 1
		if d < 1 {
			continue
		}
		own := cells[i].squares()
		total, df, groups = total+own, df+d, groups+1
		if ms := own / float64(d); ms > most {
			at, most = i, ms
		}
	}
	if at < 0 {
		return -1, 1
	}
	d := len(cells[at].values) - 1
	rest := (total - cells[at].squares()) / float64(df-d)
	if df <= d || !(rest > 0) {
		return -1, 1
	}
	return at, stats.FUpper(most/rest, float64(d), float64(df-d)) * float64(groups)
}

// among keeps the measurings of some cells.
func among(ms []Measuring, cells []cell) []Measuring {
	return slices.DeleteFunc(slices.Clone(ms), func(m Measuring) bool {
		return !slices.ContainsFunc(cells, func(c cell) bool { return c.device == m.Device && c.sitting == m.Sitting })
	})
}

// oddWords names devices, the first few of them.
func oddWords(names []string) string {
	if n := len(names); n > 4 {
		return fmt.Sprintf("%s and %d more", strings.Join(names[:3], ", "), n-3)
	}
	return strings.Join(names, ", ")
}

func medianU(ms []Measuring) float64 {
	var us []float64
	for _, m := range ms {
		if m.U > 0 {
			us = append(us, m.U)
		}
	}
	return stats.Median(us)
}

// brought takes what the temperature explains off all values, to that of the first;
// false where there is no coefficient or not all temperatures are known.
func brought(ms []Measuring, tempco float64) ([]Measuring, bool) {
	if math.IsNaN(tempco) || len(ms) == 0 || slices.ContainsFunc(ms, func(m Measuring) bool { return math.IsNaN(m.Temp) }) {
		return nil, false
	}
	out := slices.Clone(ms)
	for i := range out {
		out[i].Value -= tempco * (out[i].Temp - out[0].Temp)
	}
	return out, true
}

// warmth is the greatest difference of the temperatures, K; false where not all are
// known.
func warmth(ms []Measuring) (float64, bool) {
	low, high := math.Inf(1), math.Inf(-1)
	for _, m := range ms {
		if math.IsNaN(m.Temp) {
			return 0, false
		}
		low, high = math.Min(low, m.Temp), math.Max(high, m.Temp)
	}
	return math.Max(0, high-low), len(ms) > 0
}

// warmWords says that sittings lay at unlike temperatures.
func (s *Study) warmWords() string {
	if !(s.TempsApart >= 0.5) {
		return ""
	}
	return fmt.Sprintf("; the temperatures lie %.1f K apart and are not corrected for (--tempco)", s.TempsApart)
}

// FactorWords says beside the factors how the temperatures were dealt with, ""
// where there is nothing to say.
func (s *Study) FactorWords() string {
	if s.AtOneTemp {
		return "; brought to one temperature"
	}
	return s.warmWords()
}
