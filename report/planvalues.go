package report

import (
	"fmt"
	"math"

	"gatesill/fit/plan"
)

// factor writes a factor of a standard deviation.
func factor(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	return fmt.Sprintf("%.3f", x)
}

// index writes a capability index, downwards: what is proven is not more.
func index(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	return fmt.Sprintf("%.2f", math.Floor(x*100+1e-9)/100)
}

// indexUp writes an index that has to be reached.
func indexUp(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	return fmt.Sprintf("%.2f", math.Ceil(x*100-1e-9)/100)
}

func (p *planPrinter) cover(c *plan.Cover) {
	what := fmt.Sprintf("%s of a lot at %s confidence", share(c.Share), share(c.Confidence))
	switch {
	case c.Lot.Name != "":
		p.coverLot(c, what)
	case c.N > 0:
		p.answer("With %d measured, normal values: mean ± %s sd hold %s.", c.N, factor(c.Factors[0].Both), what)
		p.say("For one limit alone: mean + (or -) %s sd.", factor(c.Factors[0].One))
	case c.FreeBoth == 0:
		p.answer("More than a thousand million parts would be needed for limits that hold %s whatever the distribution.", what)
	default:
		p.answer("Measure %d: between the least and the greatest lies at least %s, whatever the distribution.", c.FreeBoth, what)
		p.say("For one limit alone measure %d: beyond the least (or the greatest) lies no more than %s.", c.FreeOne, share(1-c.Share))
		p.line("")
		p.say("Where values are normal fewer do; the limits are then mean ± k sd:")
		p.factors(c.Factors)
	}
	if c.N > 0 {
		p.line("")
		p.free(c)
	}
}

func (p *planPrinter) coverLot(c *plan.Cover, what string) {
	if len(c.Intervals) == 0 {
		p.answer("%s: no limits that hold %s, %s.", c.Lot.Name, what, c.Declined)
		return
	}
	p.answer("Limits of %s that hold %s, from %s of %s:", c.Lot.Of, what, count(c.Lot.N, "device"), c.Lot.Name)
	rule, low, high := column{head: "by"}, column{head: "low"}, column{head: "high"}
	for _, iv := range c.Intervals {
		name := "mean ± " + factor(iv.K) + " sd"
		if iv.Free {
			name = "least and greatest"
			if c.BlocksBoth > 2 {
				name = fmt.Sprintf("its values, %d left out", c.BlocksBoth-2)
			}
		}
		rule.cells = append(rule.cells, name)
		u := c.Lot.SD / math.Sqrt(float64(max(1, c.Lot.N)))
		low.cells, high.cells = append(low.cells, withDigits(iv.Low, u)), append(high.cells, withDigits(iv.High, u))
	}
	p.table(rule, low, high)
	p.line("")
	if c.Declined != "" {
		p.say("None by mean ± k sd: %s.", c.Declined)
		return
	}
	p.say("mean ± k sd is for normal values.")
}

// withDigits writes a voltage with the digits that the uncertainty u allows.
func withDigits(x, u float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	s := ScaleOf("V", x)
	return withUnit(s.FormatNumber(x, u, 0), s.Unit("V"))
}

func (p *planPrinter) factors(list []plan.Factors) {
	n, both, one := column{head: "parts"}, column{head: "k, two limits"}, column{head: "k, one limit"}
	for _, f := range list {
		n.cells = append(n.cells, itoa(f.N))
		both.cells, one.cells = append(both.cells, factor(f.Both)), append(one.cells, factor(f.One))
	}
	p.table(n, both, one)
}

// free says what the values themselves bound.
func (p *planPrinter) free(c *plan.Cover) {
	switch {
	case c.BlocksBoth >= 2:
		left := ""
		if c.BlocksBoth > 2 {
			left = fmt.Sprintf(" with %d left out at the ends", c.BlocksBoth-2)
		}
		p.say("Whatever the distribution, least and greatest of %d hold it too%s.", c.N, left)
	default:
		p.say("Whatever the distribution, %d are too few for that: least and greatest hold %s of the lot; %d would do.", c.N, floorShare(c.ShareBoth), c.FreeBoth)
	}
	if c.BlocksOne < 1 {
		p.say("The least (or greatest) alone has %s on its one side; %d would do.", floorShare(c.ShareOne), c.FreeOne)
	}
}

// floorShare rounds a share down, as what is promised is not more.
func floorShare(x float64) string {
	if !isNumber(x) {
		return NotAvailable
	}
	return fmt.Sprintf("%.1f %%", math.Floor(1000*x)/10)
}

func (p *planPrinter) capability(c *plan.Capability) {
	conf := share(c.Confidence)
	switch {
	case c.Lot.Name != "":
		p.capabilityLot(c, conf)
		return
	case c.TooFew:
		p.answer("%s are too few: no capability is stated from fewer than %d.", count(c.N, "part"), plan.FewestCapable)
		p.say("They would have to show a Ppk of %s to prove %s at %s confidence.", indexUp(c.Rows[0].Ppk), indexGiven(c.Target), conf)
		if isNumber(c.Bound) {
			p.say("A Ppk of %s found with them would prove no more than %s.", indexGiven(c.Expected), index(c.Bound))
		}
	case c.N > 0 && isNumber(c.Bound):
		word := "not enough to prove"
		if c.Bound >= c.Target {
			word = "enough to prove"
		}
		p.answer("A Ppk of %s found with %d parts proves %s at %s confidence: %s %s.", indexGiven(c.Expected), c.N, index(c.Bound), conf, word, indexGiven(c.Target))
		p.say("To prove %s they have to show %s.", indexGiven(c.Target), indexUp(c.Rows[0].Ppk))
	case c.N > 0:
		p.answer("%d parts have to show a Ppk of %s to prove %s at %s confidence.", c.N, indexUp(c.Rows[0].Ppk), indexGiven(c.Target), conf)
	}
	switch {
	case c.TooMany:
		p.answer("More than a million parts would be needed to prove %s by finding %s: they lie too close.", indexGiven(c.Target), indexGiven(c.Expected))
	case c.Needed > 0 && c.N == 0:
		p.answer("To prove a Ppk of %s at %s confidence, with %s expected to be found, measure %d.", indexGiven(c.Target), conf, indexGiven(c.Expected), c.Needed)
	case c.Needed > 0:
		p.say("With %s expected, %d are needed.", indexGiven(c.Expected), c.Needed)
	case c.N == 0:
		p.answer("To prove a Ppk of %s at %s confidence, so many parts have to show so much:", indexGiven(c.Target), conf)
	}
	if c.N == 0 {
		n, ppk := column{head: "parts"}, column{head: "Ppk to be found"}
		for _, r := range c.Rows {
			n.cells, ppk.cells = append(n.cells, itoa(r.N)), append(ppk.cells, indexUp(r.Ppk))
		}
		p.table(n, ppk)
	}
	p.line("")
	p.say("For normal values, by the nearer limit.")
}

func indexGiven(x float64) string { return fmt.Sprintf("%.4g", x) }

func (p *planPrinter) capabilityLot(c *plan.Capability, conf string) {
	switch {
	case c.Declined != "":
		p.answer("%s: no capability is stated, %s.", c.Lot.Name, c.Declined)
	default:
		word := "not proven"
		if c.Proven {
			word = "proven"
		}
		p.answer("%s: Ppk %s, at least %s at %s confidence (%s): %s is %s.", c.Lot.Name, index(c.Index.Cpk), index(c.BoundOf), conf, count(c.Lot.N, "device"), indexGiven(c.Target), word)
		if isNumber(c.Index.Cp) {
			p.say("Pp %s: what it would be with the mean in the middle.", index(c.Index.Cp))
		}
	}
	p.say("V_GS(th) against %s.", limitWords(c.Low, c.High))
}

func limitWords(low, high float64) string {
	switch {
	case isNumber(low) && isNumber(high):
		return fmt.Sprintf("%s to %s", FormatGiven(low, "V"), FormatGiven(high, "V"))
	case isNumber(low):
		return "at least " + FormatGiven(low, "V")
	case isNumber(high):
		return "at most " + FormatGiven(high, "V")
	}
	return "no limit"
}

func (p *planPrinter) accept(a *plan.Accept) {
	k := factor(a.Plan.K)
	if isNumber(a.AcceptRequest.K) {
		k = indexGiven(a.AcceptRequest.K)
	}
	sd := "sd"
	if a.Plan.KnownSigma {
		sd = "sigma (" + FormatGiven(a.KnownSigma, "V") + ", known)"
	}
	if a.Lot.Name != "" {
		p.decision(a, k)
	} else {
		p.answer("Measure %d. Accept the lot when its mean is at least %s %s away from the limit.", a.Plan.N, k, sd)
	}
	if isNumber(a.AtGood) || isNumber(a.AtBad) {
		bad, acc, risk := column{head: "bad in the lot"}, column{head: "accepted"}, column{head: "risk"}
		if isNumber(a.AtGood) {
			bad.cells, acc.cells, risk.cells = append(bad.cells, share(a.Good)), append(acc.cells, Chance(a.AtGood)), append(risk.cells, "refusing a good lot: "+Chance(1-a.AtGood))
		}
		if isNumber(a.AtBad) {
			bad.cells, acc.cells, risk.cells = append(bad.cells, share(a.Bad)), append(acc.cells, Chance(a.AtBad)), append(risk.cells, "accepting a bad one: "+Chance(a.AtBad))
		}
		p.table(bad, acc, risk)
	}
	if a.Needed > a.Plan.N {
		p.line("")
		p.say("To keep both risks (%s and %s) measure %d.", share(a.GoodRisk), share(a.Risk), a.Needed)
	}
	if !isNumber(a.AtGood) || !isNumber(a.AtBad) {
		p.line("")
		p.say("95 of 100 lots with %s bad are accepted, 10 of 100 with %s.", Chance(a.Often), Chance(a.Seldom))
	}
	if a.Lot.Name == "" {
		p.line("")
		p.curve(a)
		p.line("")
		if a.CountN > 0 {
			p.say("Counting bad parts instead would take %d, of which %d may be bad.", a.CountN, a.CountMost)
		}
		p.say("For normal values. With two limits the shares estimated beyond both are added, and may together be no more than at one limit.")
	}
}

func (p *planPrinter) decision(a *plan.Accept, k string) {
	j := a.Judgement
	if a.Decision == plan.Undecided {
		p.answer("%s: not decided, %s.", a.Lot.Name, a.Undecided)
		if isNumber(a.BadWithThose) {
			p.say("--n %d decides with those; a lot with %s bad is then accepted %s of the time.", a.Lot.N, share(a.Bad), Chance(a.BadWithThose))
		}
	} else {
		p.answer("%s: %s (%s, V_GS(th) against %s).", a.Lot.Name, string(a.Decision), count(a.Lot.N, "device"), limitWords(a.Low, a.High))
	}
	for _, q := range []struct {
		x    float64
		what string
	}{{j.QLow, "lower"}, {j.QHigh, "upper"}} {
		if isNumber(q.x) && j.Computable {
			p.say("Its mean is %.2f sd away from the %s limit; the plan wants %s.", q.x, q.what, k)
		}
	}
	if j.Computable && isNumber(j.QLow) && isNumber(j.QHigh) {
		p.say("Beyond both limits together %s are estimated; %s may be.", Chance(j.BadLow+j.BadHigh), Chance(j.MostBad))
	}
	if a.SigmaDoubt {
		p.say("Caution: it spreads more (sd %s) than the known sigma of %s lets expect.", about(a.Lot.SD), FormatGiven(a.KnownSigma, "V"))
	}
}
