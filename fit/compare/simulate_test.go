package compare

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"gatesill/fit"
	"gatesill/fit/stats"
)

// The simulations draw lots and count verdicts; long ones with GATESILL_LONG=1, which
// print what they find. Seeds: the first number is that of the test, the second
// that of the cell.

// long reports whether the long version was asked for.
func long() bool { return os.Getenv("GATESILL_LONG") != "" }

// runs is how many lots are drawn for a cell.
func runs() int {
	if long() {
		return 20_000
	}
	return 200
}

// bar is a share with what chance may add to it, three standard errors of the runs
// drawn in the short version and none in the long one, whose bars hold as they are.
func bar(share float64, runs int) float64 {
	if long() {
		return share
	}
	return share + 3*math.Sqrt(share*(1-share)/float64(runs))
}

// lowBar is bar downwards.
func lowBar(share float64, runs int) float64 {
	if long() {
		return share
	}
	return share - 3*math.Sqrt(share*(1-share)/float64(runs))
}

// quickly goes the way of [Lots] as far as the verdict.
func quickly(t *testing.T, ref, cand *Lot, opt Options) Comparison {
	t.Helper()
	c := &comparing{opt: opt}
	if err := c.begin(ref, cand); err != nil {
		t.Fatal(err)
	}
	c.least = least(c.ref, c.cand)
	c.pairs = c.pairing()
	c.primary()
	c.judge() // not how many would tell, which takes longest by far
	return c.out
}

// drawer draws values of devices about 0.
type drawer struct {
	*rand.Rand
	odd float64 // share of devices from a spread ten times as wide
}

func draws(test, cell uint64) *drawer { return &drawer{rand.New(rand.NewPCG(test, cell)), 0} }

func (d *drawer) value(sd float64) float64 {
	x := sd * d.NormFloat64()
	if d.odd > 0 && d.Float64() < d.odd {
		x *= 10
	}
	return x
}

// lot draws a lot of n devices.
func (d *drawer) lot(name string, n int, mean, sd float64) *Lot {
	v := make([]float64, n)
	for i := range v {
		v[i] = mean + d.value(sd)
	}
	l := lotOf(name, v...)
	return &l
}

// Clean lots of one kind: how often the verdict is 'differs', how often the interval
// holds the true shift, and how often a shift is found.
func TestSimulated(t *testing.T) {
	const sd, shift = 0.080, 0.060
	n := runs()
	cell := uint64(0)
	for _, odd := range []float64{0, 0.05} {
		for _, size := range [][2]int{{6, 6}, {20, 20}, {40, 40}, {6, 20}, {6, 40}, {10, 40}} {
			cell++
			d := draws(1, cell)
			d.odd = odd
			var differs, covers, found float64
			for range n {
				a, b := d.lot("A", size[0], 3, sd), d.lot("B", size[1], 3, sd)
				c := quickly(t, a, b, plain())
				if c.Verdict == Differs {
					differs++
				}
				for i := range b.Members {
					b.Members[i].Result.VgsIdle.Value += shift
				}
				c = quickly(t, a, b, plain())
				if c.Low <= shift && c.High >= shift {
					covers++
				}
				if c.Verdict == Differs {
					found++
				}
			}
			N := float64(n)
			differs, covers, found = differs/N, covers/N, found/N
			t.Logf("%2d and %2d, %.0f %% from a wide spread: false 'differs' %.2f %%, coverage %.2f %%, 60 mV at 80 mV found %.1f %%, formula %.1f %% (Welch %.1f %%)",
				size[0], size[1], odd*100, differs*100, covers*100, found*100, 100*powerOf(size, shift/sd), 100*powerOfWelch(size, shift/sd))
			// A small lot against a large one: see between.
			most := 0.06
			if size[0] != size[1] {
				most = 0.075
			}
			if differs < lowBar(0.03, n) || differs > bar(most, n) {
				t.Errorf("false 'differs' %.4f, want 0.03 to %v", differs, most)
			}
			if covers < lowBar(1-most, n) || covers > bar(0.97, n) {
				t.Errorf("coverage %.4f, want %v to 0.97", covers, 1-most)
			}
			// With lots of 6 the degrees of freedom found from the lots themselves are
			// fewer than those of the formula: 3.5 points less.
			if want := powerOf(size, shift/sd); odd == 0 && math.Abs(found-want) > bar(0.04, n) {
				t.Errorf("power %.3f, formula %.3f", found, want)
			}
		}
	}
}

// powerOf is the chance that Yuen's test at 5 % finds a shift of that many standard
// deviations of normal values: noncentral t.
func powerOf(n [2]int, shift float64) float64 {
	e := estimate{}
	for _, m := range n {
		e.with(winsorised(m)*perSD(m), float64(m-2*cut(m)-1))
	}
	q := stats.UpperT(0.025, e.df())
	return stats.NoncentralTUpper(q, e.df(), shift/e.se()) + stats.NoncentralTLower(-q, e.df(), shift/e.se())
}

// powerOfWelch is the same of Welch's test.
func powerOfWelch(n [2]int, shift float64) float64 {
	e := estimate{}
	for _, m := range n {
		e.with(1/math.Sqrt(float64(m)), float64(m-1))
	}
	q := stats.UpperT(0.025, e.df())
	return stats.NoncentralTUpper(q, e.df(), shift/e.se()) + stats.NoncentralTLower(-q, e.df(), shift/e.se())
}

// A true shift as large as the margin is called inside it in at most 5 % of cases.
func TestSimulatedMargin(t *testing.T) {
	n := runs()
	cell := uint64(0)
	for _, size := range []int{6, 20, 40} {
		for _, sd := range []float64{0.010, 0.030, 0.080} {
			cell++
			d := draws(2, cell)
			opt := plain()
			opt.Margin, opt.MarginSet = 0.05, Before
			inside, outside := 0.0, 0.0
			for range n {
				c := quickly(t, d.lot("A", size, 3, sd), d.lot("B", size, 3.05, sd), opt)
				switch c.Verdict {
				case InsideMargin:
					inside++
				case OutsideMargin:
					outside++
				}
			}
			inside, outside = inside/float64(n), outside/float64(n)
			t.Logf("%2d and %2d, sd %.0f mV: true shift at the margin called inside %.2f %%, outside %.2f %%", size, size, sd*1e3, inside*100, outside*100)
			most := 0.05 + 2*math.Sqrt(0.05*0.95/float64(n))
			if !long() {
				most = bar(0.05, n)
			}
			if inside > most || outside > most {
				t.Errorf("inside %.4f, outside %.4f, want at most %.4f", inside, outside, most)
			}
		}
	}
}

// The number of devices that more gives finds a lot without shift inside the margin
// with a chance of about 0.8.
func TestMoreTells(t *testing.T) {
	n := runs()
	for cell, sd := range []float64{0.012, 0.030, 0.080} {
		for k, u := range []float64{0, 0.010} {
			d := draws(3, uint64(10*cell+k))
			opt := plain()
			opt.Margin, opt.MarginSet = 0.05, Before
			size := enough(0.05, sd, 2, u)
			inside := 0.0
			for range n {
				off := 0.0
				ref, cand := Sitting{Session: "1", Meters: "m"}, Sitting{Session: "1", Meters: "m"}
				if u > 0 {
					// Two sessions of u/√2 each.
					cand.Session = "2"
					off = u * d.NormFloat64()
				}
				a, b := d.lot("A", size, 3, sd), d.lot("B", size, 3+off, sd)
				sit(a, ref, u/math.Sqrt2, 0)
				sit(b, cand, u/math.Sqrt2, 0)
				if quickly(t, a, b, opt).Verdict == InsideMargin {
					inside++
				}
			}
			inside /= float64(n)
			t.Logf("sd %.0f mV, common %.0f mV: %d devices a lot, inside %.1f %%", sd*1e3, u*1e3, size, inside*100)
			// Whole devices give a little more than asked for at small numbers.
			if inside < 0.8-0.03-3*0.4/math.Sqrt(float64(n)) || inside > 0.93 && size > fewest {
				t.Errorf("inside %.3f, want about 0.8", inside)
			}
		}
	}
}

// sit puts all devices of a lot in one sitting, with uncertainties tau by session and
// gamma by meters.
func sit(l *Lot, s Sitting, tau, gamma float64) {
	for i := range l.Members {
		m := &l.Members[i]
		m.Sittings = []Sitting{s}
		q := &m.Result.VgsIdle
		q.UBetween = math.Hypot(q.U, tau)
		q.UAbsolute = math.Hypot(q.UBetween, gamma)
	}
}

// The same parts on a second bench whose meters read 0.3 % more, within their
// statement of 0.5 %, held against themselves without pairing: what is the bench's
// is not called a difference of the lots. By serial and without the common error it
// always would, and without pairing wherever 9 mV stand out of the scatter of the lots.
func TestSimulatedSecondBench(t *testing.T) {
	n := runs()
	cell := uint64(0)
	for _, size := range []int{6, 20, 40} {
		for _, sd := range []float64{0.010, 0.080} {
			cell++
			d := draws(4, cell)
			differs, without, serial, drawn := 0.0, 0.0, 0.0, 0.0
			for range n {
				a := d.lot("A", size, 3, sd)
				second := func(gain float64) *Lot {
					b := Lot{Name: "B", Members: append([]Member(nil), a.Members...)}
					for i := range b.Members {
						b.Members[i].Result.VgsIdle.Value *= 1 + gain
					}
					return &b
				}
				gamma := 3 * 0.005 / math.Sqrt(3)
				judge := func(b *Lot, gamma float64, how Pairing) bool {
					sit(a, Sitting{"1", "m"}, 0, gamma)
					sit(b, Sitting{"2", "n"}, 0, gamma)
					opt := plain()
					opt.Pairing = how
					return quickly(t, a, b, opt).Verdict == Differs
				}
				b := second(0.003)
				if judge(b, gamma, Never) {
					differs++
				}
				if judge(b, 0, Never) {
					without++
				}
				if judge(b, 0, BySerial) {
					serial++
				}
				// Both benches anywhere within their statements.
				if judge(second(0.005*(2*d.Float64()-1)-0.005*(2*d.Float64()-1)), gamma, Never) {
					drawn++
				}
			}
			N := float64(n)
			t.Logf("%2d parts, sd %.0f mV: gain of 0.3 %% called a difference %.2f %% (without the common error %.1f %%, by serial %.1f %%); gains drawn %.2f %%", size, sd*1e3, 100*differs/N, 100*without/N, 100*serial/N, 100*drawn/N)
			if differs/N > 0.05 || drawn/N > bar(0.05, n) {
				t.Errorf("called a difference %.4f, drawn %.4f, want at most 0.05", differs/N, drawn/N)
			}
			if serial/N < 0.9 {
				t.Errorf("by serial without the common error called a difference %.4f, want more than 0.9: nothing is tried", serial/N)
			}
			if size == 40 && sd < 0.02 && without/N < 0.9 {
				t.Errorf("without the common error called a difference %.4f, want more than 0.9", without/N)
			}
		}
	}
}

// The same parts twice, by serial: false 'differs', and that they are paired by
// themselves.
func TestSimulatedPairs(t *testing.T) {
	n := runs()
	cell := uint64(0)
	for _, odd := range []float64{0, 0.05} {
		for _, size := range []int{6, 12, 30} {
			cell++
			d := draws(5, cell)
			differs, paired, strangers := 0.0, 0.0, 0.0
			for range n {
				a := d.lot("A", size, 3, 0.08)
				b := &Lot{Name: "B", Members: append([]Member(nil), a.Members...)}
				d.odd = odd
				for i := range b.Members {
					b.Members[i].Result.VgsIdle.Value += d.value(0.002)
				}
				d.odd = 0
				opt := plain()
				opt.Pairing = ByLikeness
				c := quickly(t, a, b, opt)
				if c.Paired != nil {
					paired++
				}
				opt.Pairing = BySerial
				if quickly(t, a, b, opt).Verdict == Differs {
					differs++
				}
				o := d.lot("A", size, 3, 0.08)
				o.Name = "O"
				opt.Pairing = ByLikeness
				if quickly(t, a, o, opt).Paired != nil {
					strangers++
				}
			}
			N := float64(n)
			t.Logf("%2d pairs, %.0f %% wide: false 'differs' %.2f %%, paired by likeness %.1f %%, other parts of the same serials paired %.3f %%", size, odd*100, 100*differs/N, 100*paired/N, 100*strangers/N)
			if differs/N > bar(0.06, n) || odd == 0 && differs/N < lowBar(0.03, n) {
				t.Errorf("false 'differs' %.4f", differs/N)
			}
			if odd == 0 && paired/N < 0.97 || strangers/N > bar(0.001, n) {
				t.Errorf("paired %.3f, strangers %.4f", paired/N, strangers/N)
			}
		}
	}
}

// Whole curves: the band holds all true shifts at once. Thresholds spread by 80 mV,
// gains by 10 %, readings by 1 mV.
func TestSimulatedBand(t *testing.T) {
	n := runs() / 4
	if !long() {
		n = 20
	}
	cell := uint64(0)
	for _, odd := range []float64{0, 0.05} {
		for _, size := range []int{6, 20, 40} {
			cell++
			if !long() && odd > 0 {
				continue // for the time it takes
			}
			d := draws(6, cell)
			d.odd = odd
			covers, differs, points := 0.0, 0.0, 0
			for range n {
				a, b := d.curves("A", size, 0), d.curves("B", size, 0)
				c := &comparing{opt: plain()}
				if err := c.begin(a, b); err != nil {
					t.Fatal(err)
				}
				c.primary()
				band := c.curves()
				if band == nil {
					t.Fatal("no band")
				}
				if !band.Differs {
					covers++
				}
				points = len(band.Points)
				if c.out.Low > 0 || c.out.High < 0 {
					differs++
				}
			}
			covers /= float64(n)
			t.Logf("%2d and %2d, %.0f %% wide: band of %d currents holds all %.2f %%; primary interval alone %.2f %%", size, size, odd*100, points, covers*100, 100-100*differs/float64(n))
			if covers < lowBar(0.94, n) {
				t.Errorf("band covers %.4f", covers)
			}
		}
	}
}

// curves draws a lot with curves from 1 mA to 1 A.
func (d *drawer) curves(name string, n int, shift float64) *Lot {
	l := d.lot(name, n, 3+shift, 0.08)
	for i := range l.Members {
		r := &l.Members[i].Result
		beta := 4 * math.Exp(0.1*d.NormFloat64())
		vt := r.VgsIdle.Value - math.Sqrt(2*0.25/4)
		r.VgsIdle.Value = vt + math.Sqrt(2*0.25/beta)
		for _, at := range fit.LevelCurrents {
			if at >= 1e-3 && at <= 1 {
				r.Levels = append(r.Levels, fit.Level{I: at, Vg: vt + math.Sqrt(2*at/beta) + 0.001*d.NormFloat64(), U: 0.001})
			}
		}
	}
	return l
}

// Five lots of one kind: how often any of the ten comparisons is called a difference.
func TestSimulatedTrend(t *testing.T) {
	n := runs() / 2
	for cell, size := range []int{6, 20} {
		d := draws(10, uint64(cell))
		called, overlap := 0.0, 0.0
		for range n {
			var lots []Lot
			for _, name := range []string{"A", "B", "C", "D", "E"} {
				lots = append(lots, *d.lot(name, size, 3, 0.08))
			}
			tr, err := TrendOf(lots, plain())
			if err != nil {
				t.Fatal(err)
			}
			p, low, high := 1.0, math.Inf(-1), math.Inf(1)
			for _, q := range tr.Pairs {
				p, low, high = min(p, q.PAdjusted), max(low, q.Low), min(high, q.High)
			}
			if p <= 0.05 {
				called++
			}
			if low > 0 || high < 0 {
				overlap++
			}
		}
		called, overlap = called/float64(n), overlap/float64(n)
		t.Logf("5 lots of %d: any of 10 comparisons called a difference %.2f %%, by the intervals %.2f %%", size, called*100, overlap*100)
		if called > bar(0.06, n) || overlap > bar(0.06, n) {
			t.Errorf("called %.4f, %.4f, want at most 0.06", called, overlap)
		}
	}
}
