package match

import (
	"context"
	"fmt"
	"math"
	"slices"
)

// Match puts the members in sets.
//
// One quantity is exact for every set size and aim, by a dynamic programme over
// the devices in order (oneline.go says why that is enough). Pairs in several
// quantities or by the whole curve, pairs of n-channel with p-channel devices, and
// fours of two packages are exact, by matchings of least weight whose prices are
// checked anew for every pair. Sets of three and more in several quantities, and of
// single devices mixed with packages, are exact up to 20 of them, beyond which they
// are searched for; a lower bound, for which a
// proof was carried out, says how much better any other answer can be at most.
//
// Members are not modified. The result is the same on every run, except where the
// time limit ends a search. When ctx ends first, the result is what has been found
// by then, with a bound; the error is that of ctx where that is nothing. With too
// few devices for one set the result still lists them all with the reasons, and the
// error is ErrTooFew.
//
// Errors: ErrSize, ErrCriteria, ErrWeights, ErrTolerance, ErrAim, ErrCurrents for
// options that cannot be; ErrTooFew. Warnings: see there.
//
// Checked: TestOneQuantityBrute, TestPairsBrute, TestGroupsBound, TestTenParts, TestPushPull, TestHundredOutputs.
func Match(ctx context.Context, members []Member, opt Options) (*Matching, error) {
	p, err := newProblem(members, opt)
	if err != nil {
		return nil, err
	}
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	m := &Matching{
		Size: p.opt.Size, At: p.opt.At, Aim: p.opt.Aim, By: p.opt.By, Currents: p.currents, Complementary: p.complementary,
		Step: p.step, Coarsest: p.coarsest, Offered: len(p.used), Worst: math.NaN(), LeftOver: p.left,
		Bound: Bound{Kind: Optimal, Worst: math.NaN(), Proof: "there is nothing to choose from"},
	}
	if len(p.used) < p.opt.Size {
		m.Text = fmt.Sprintf("No set of %d: %s.", p.opt.Size, p.whyTooFew())
		p.leave(m, nil)
		return m, fmt.Errorf("%w: %s", ErrTooFew, p.whyTooFew())
	}
	a, err := p.solve(ctx)
	if err != nil {
		return nil, err
	}
	p.fill(m, a)
	p.warn(m)
	if !p.opt.NoTradeOff {
		m.TradeOff = p.tradeOff(ctx, m)
	}
	return m, nil
}

// whyTooFew counts what keeps devices out.
func (p *problem) whyTooFew() string {
	locked, out := 0, 0
	for _, l := range p.left {
		if l.Locked != "" {
			locked++
		} else {
			out++
		}
	}
	return fmt.Sprintf("of %s %d can be given, %d are in other sets and %d are kept out or have no value",
		plural(len(p.members), "device"), len(p.used), locked, out)
}

// solve finds the sets.
func (p *problem) solve(ctx context.Context) (*answer, error) {
	if p.oneQuantity() && p.loose() && !p.complementary {
		return p.oneLine(), nil
	}
	if c := p.couples(); c != nil {
		return p.matchPairs(ctx, c)
	}
	return p.matchGroups(ctx, true), nil
}

// oneLine is the exact answer in one quantity.
func (p *problem) oneLine() *answer {
	x, order := p.sortedFirst()
	k := p.opt.Size
	var r runs
	switch p.opt.Aim {
	case Worst:
		r = worstRuns(x, k)
	case Best:
		r = bestRuns(x, k, p.opt.Sets, p.firstLimit())
	default:
		r = mostRuns(x, k, p.firstLimit())
	}
	a := &answer{kind: Optimal, total: r.total, worst: r.worst, most: len(r.starts)}
	if p.limits() {
		a.most = countRuns(x, k, p.limit[0])
	} else {
		a.most = len(x) / k
	}
	for _, s := range r.starts {
		a.sets = append(a.sets, slices.Clone(order[s:s+k])) // every item is the device of its number
	}
	a.proof = fmt.Sprintf("every way to take runs of %d neighbours from the %d devices in order was weighed, and in one quantity no other sets can be better", k, len(x))
	return a
}

// devicesOf gives the devices of a set of an answer, which holds items or, for
// pairs, devices.
func (p *problem) devicesOf(set []int) []int {
	if p.opt.Size == 2 {
		return slices.Clone(set)
	}
	var ds []int
	for _, i := range set {
		ds = append(ds, p.items[i].devices...)
	}
	return ds
}
