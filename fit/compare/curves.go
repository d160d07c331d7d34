package compare

import (
	"fmt"
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/stats"
)

const (
	// mostCarriedOn is the share of devices of a lot whose curves may end before a
	// current that is still compared.
	mostCarriedOn = 0.2
	// bandDraws are drawn for the critical value: its own error is about 0.015.
	bandDraws = 20_000
	bandSeed  = 20260401
)

// curves compares whole curves: the shift of the gate voltage at every current of
// [fit.LevelCurrents] that at least 3 devices and four fifths of those with a curve
// have on either side, each by trimmed means as the primary shift is, and a band
// that holds all of them together:
//
//	shift_k ± q se_k,  q the quantile of max |T_k|
//
// T is multivariate t with the correlations of the shifts at different currents,
// estimated from the winsorised covariances of the devices' curves, and the fewest
// degrees of freedom of any current; q is found by drawing from it, always with the
// same seed. What session and meters do is taken to move all currents alike, as the
// primary shift. A curve that ends before a current is carried on parallel to the
// median of its lot: left out it would draw the mean to the devices that reach the
// current easily, counted as above all others it would do the opposite where a sweep
// was only stopped sooner.
//
// Result: nil, with a warning, where no current is common. Source: the principle is
// that of simultaneous intervals of correlated contrasts: Hothorn, Bretz and
// Westfall, "Simultaneous inference in general parametric models", Biometrical
// Journal 50 (2008) 346-363; with winsorised covariances own choice. Checked:
// TestBand, TestSimulatedBand.
func (c *comparing) curves() *Band {
	at, sh := c.shifts()
	if len(at) == 0 {
		c.warnNoCurves()
		return nil
	}
	b := &Band{Level: c.opt.Level}
	k := len(at)
	u, nu := c.out.Common.U, math.Inf(1)
	if math.IsNaN(u) {
		u = 0
	}
	if c.out.Common.Controls > 1 && !math.IsInf(c.tied.nu, 1) {
		nu = c.tied.nu
	}
	se := make([]float64, k)
	df := math.Inf(1)
	for i := range at {
		e := estimate{parts: sh.parts[i]}
		e.with(u, nu)
		se[i] = e.se()
		df = math.Min(df, e.df())
	}
	corr := make([][]float64, k)
	for i := range corr {
		corr[i] = make([]float64, k)
		for j := range corr[i] {
			corr[i][j] = (sh.cov[i][j] + u*u) / (se[i] * se[j])
		}
	}
	if slices.ContainsFunc(se, func(s float64) bool { return !(s > 0) }) || !(df > 0) {
		c.warn(fit.CodeBenchLimited, "the curves were not compared: at some current all devices of a lot read the same")
		return nil
	}
	b.Critical = maxT(corr, df, c.opt.Level)
	offsets := c.curveOffsets(at)
	for i := range at {
		s := sh.mean[i] - offsets[i]
		p := BandPoint{I: fit.LevelCurrents[at[i]], Shift: s, Low: s - b.Critical*se[i], High: s + b.Critical*se[i],
			Reference: sh.n[0][i], Candidate: sh.n[1][i]}
		b.Differs = b.Differs || p.Low > 0 || p.High < 0
		b.Points = append(b.Points, p)
	}
	b.Text = c.bandWords(b, sh, df)
	return b
}

// warnNoCurves says what the curves lack: devices, or a current that both lots reach.
func (c *comparing) warnNoCurves() {
	if c.opt.Spots { // nobody expects curves of them
		return
	}
	n, what := min(levelsOf(partOf(c.ref.lot)).has, levelsOf(partOf(c.cand.lot)).has), "devices with a curve"
	if c.pairs != nil {
		n, what = min(levelsOf(c.pairs.ref).has, levelsOf(c.pairs.cand).has), "pairs with curves"
	}
	if n < fewest {
		c.warn(fit.CodeNTooSmall, fmt.Sprintf("the curves were not compared: they need %d %s on either side, and there are %d", fewest, what, n))
		return
	}
	c.warn(fit.CodeFewPoints, "the curves were not compared: there is no current that enough of them pass in both lots")
}

// levelShifts are the shifts at several currents without what is common to the lots.
type levelShifts struct {
	mean  []float64      // by current
	parts [][]stats.Part // of the standard uncertainty of mean
	cov   [][]float64    // of the shifts
	n     [2][]int       // devices with a gate voltage: reference, candidate
}

// shifts gives the currents compared, as indices of [fit.LevelCurrents], and what
// the lots are apart there.
func (c *comparing) shifts() ([]int, *levelShifts) {
	if c.pairs != nil {
		return c.pairedShifts()
	}
	ref, cand := levelsOf(partOf(c.ref.lot)), levelsOf(partOf(c.cand.lot))
	at := common(ref.enough(), cand.enough())
	if len(at) == 0 {
		return nil, nil
	}
	a, b := ref.at(at), cand.at(at)
	sa, sb := summaries(a), summaries(b)
	s := &levelShifts{cov: sa.cov, n: [2][]int{ref.counts(at), cand.counts(at)}}
	for i := range at {
		e := between(sa.means[i], sb.means[i])
		s.mean, s.parts = append(s.mean, e.shift), append(s.parts, e.parts)
		for j := range at {
			s.cov[i][j] += sb.cov[i][j]
		}
	}
	return at, s
}

// pairedShifts is shifts by the differences of the pairs.
func (c *comparing) pairedShifts() ([]int, *levelShifts) {
	ref, cand := levelsOf(c.pairs.ref), levelsOf(c.pairs.cand)
	at := common(ref.enough(), cand.enough())
	if len(at) == 0 {
		return nil, nil
	}
	a, b := ref.at(at), cand.at(at)
	s := &levelShifts{n: [2][]int{ref.counts(at), cand.counts(at)}}
	d := make([][]float64, len(at))
	for i := range at {
		for k := range a[i] {
			if x := b[i][k] - a[i][k]; !math.IsNaN(a[0][k]) && !math.IsNaN(b[0][k]) {
				d[i] = append(d[i], x)
			}
		}
	}
	if len(d[0]) < fewest {
		return nil, nil
	}
	sd := summaries(d)
	s.cov = sd.cov
	for i := range at {
		e := within(sd.means[i])
		s.mean, s.parts = append(s.mean, e.shift), append(s.parts, e.parts)
	}
	return at, s
}

// curveOffsets is what is taken off the shift at each current: what the control
// parts say there, where they have curves, else what they say of the primary shift.
// The temperature moves every current differently and is not taken off.
func (c *comparing) curveOffsets(at []int) []float64 {
	out := make([]float64, len(at))
	if c.out.Common.Controls == 0 {
		return out
	}
	var ref, cand []*Member
	for _, p := range c.tied.pairs {
		ref, cand = append(ref, p[0]), append(cand, p[1])
	}
	a, b := levelsOf(ref), levelsOf(cand)
	for i, k := range at {
		sum := 0.0
		for j := range ref {
			sum += (b.vg[k][j] - a.vg[k][j]) / float64(len(ref))
		}
		if out[i] = sum; math.IsNaN(sum) {
			out[i] = c.out.Common.Offset
		}
	}
	return out
}

// bandWords says what the band shows.
func (c *comparing) bandWords(b *Band, s *levelShifts, df float64) string {
	first, last := b.Points[0], b.Points[len(b.Points)-1]
	where := "at " + amps(first.I)
	if len(b.Points) > 1 {
		where = fmt.Sprintf("from %s to %s", amps(first.I), amps(last.I))
	}
	text := fmt.Sprintf("%s no difference of the curves is seen; shifts of up to %s are not excluded", where, millivolts(widest(b)))
	if b.Differs {
		least, most := first.Shift, first.Shift
		from, to := math.Inf(1), 0.0
		for _, p := range b.Points {
			least, most = min(least, p.Shift), max(most, p.Shift)
			if p.Low > 0 || p.High < 0 {
				from, to = min(from, p.I), max(to, p.I)
			}
		}
		apart := "at " + amps(from)
		if to > from {
			apart = fmt.Sprintf("between %s and %s", amps(from), amps(to))
		}
		text = fmt.Sprintf("the curves differ %s; the shift is %s %s", apart, fromTo(least, most), where)
	}
	if len(b.Points) > 1 {
		text += parallelWords(b, s, df, c.opt.Level)
	}
	if c.out.ForTemp != 0 {
		text += "; what was taken off the shift for the temperature is not taken off here, as it is another at every current"
	}
	return text
}

// widest is the largest shift that the band does not exclude.
func widest(b *Band) float64 {
	w := 0.0
	for _, p := range b.Points {
		w = math.Max(w, math.Max(math.Abs(p.Low), math.Abs(p.High)))
	}
	return w
}

// parallelWords finds whether the shift changes with the current, by its change from
// the lowest current to the highest, from which what the lots share falls out.
func parallelWords(b *Band, s *levelShifts, df, level float64) string {
	first, last := b.Points[0], b.Points[len(b.Points)-1]
	k := len(b.Points) - 1
	d := last.Shift - first.Shift
	se := math.Sqrt(math.Max(0, s.cov[0][0]+s.cov[k][k]-2*s.cov[0][k]))
	switch {
	case se > 0 && math.Abs(d) > stats.UpperT((1-level)/2, df)*se:
		b.Changes = true
		return fmt.Sprintf("; it changes with the current, by %s from the lowest to the highest", shiftWords(d))
	case b.Differs:
		return "; no change with the current is seen: a parallel shift"
	}
	return ""
}

// fromTo writes a range of shifts, or one where they read the same.
func fromTo(least, most float64) string {
	if signed(least) == signed(most) {
		return shiftWords(least)
	}
	return signed(least) + " to " + shiftWords(most)
}
