package match

import (
	"context"
	"math"
	"time"

	"gatesill/fit"
)

// tolerances of the trade-off table, V.
var tolerances = []float64{0.001, 0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2}

const (
	exactTradeOff = 1200            // devices up to which the table of pairs is exact
	mostTradeOff  = 2500            // devices from which it holds the tolerance asked for alone: the search takes too long, and finds too few
	quickSearch   = 2 * time.Second // for the whole table, where only a search can
)

// tradeOff gives the number of sets at each tolerance of the table.
//
// Where only a search can, sets found at a smaller tolerance, and those of the
// answer m itself, count at a greater one too.
func (p *problem) tradeOff(ctx context.Context, m *Matching) []TradeOff {
	var rows []TradeOff
	gm := p.median(fit.KeyGmIdle)
	if len(p.used) > mostTradeOff && !(p.oneQuantity() && p.loose()) {
		if t := p.opt.By[0].Within; m.Aim == Most && t > 0 && len(m.Sets) > 0 {
			row := TradeOff{Within: t, Sets: len(m.Sets), Total: m.Total, Mean: m.Total / float64(len(m.Sets)), Left: len(m.LeftOver), Exact: m.Bound.Kind == Optimal, Imbalance: math.NaN()}
			if gm > 0 && p.opt.At > 0 {
				row.Imbalance = t / (p.opt.SourceResistor + 1/gm)
			}
			rows = append(rows, row)
		}
		return rows
	}
	for _, t := range tolerances {
		if ctx.Err() != nil {
			return rows
		}
		q := p.at1(t)
		row := TradeOff{Within: t, Mean: math.NaN(), Imbalance: math.NaN()}
		sets, total, exact := q.countSets(ctx, quickSearch/time.Duration(len(tolerances)))
		row.Sets, row.Total, row.Exact = sets, float64(total)/nano, exact
		better := func(sets int, total float64) {
			if !exact && (sets > row.Sets || sets == row.Sets && total < row.Total) {
				row.Sets, row.Total = sets, total
			}
		}
		if len(rows) > 0 {
			better(rows[len(rows)-1].Sets, rows[len(rows)-1].Total)
		}
		if first := p.opt.By[0].Within; m.Aim == Most && t >= first*(1-1e-9) {
			better(len(m.Sets), m.Total)
			row.Exact = row.Exact || math.Abs(t-first) < 1e-9*t && m.Bound.Kind == Optimal
		}
		sets = row.Sets
		if sets > 0 {
			row.Mean = row.Total / float64(sets)
		}
		row.Left = len(p.used) - sets*p.opt.Size
		if gm > 0 && p.opt.At > 0 {
			row.Imbalance = t / (p.opt.SourceResistor + 1/gm)
		}
		rows = append(rows, row)
	}
	return rows
}

// at1 is the problem of as many sets as possible at another tolerance of the first
// criterion.
func (p *problem) at1(within float64) *problem {
	q := *p
	q.opt.Aim, q.opt.Sets = Most, 0
	q.limit = append([]int64(nil), p.limit...)
	q.limit[0] = p.limitOf(0, within)
	return &q
}

// countSets gives the greatest number of sets that is found, and their total.
func (p *problem) countSets(ctx context.Context, quick time.Duration) (sets int, total int64, exact bool) {
	if len(p.used) < p.opt.Size {
		return 0, 0, true
	}
	if p.oneQuantity() && p.loose() && !p.complementary {
		x, _ := p.sortedFirst()
		r := mostRuns(x, p.opt.Size, p.limit[0])
		return len(r.starts), r.total, true
	}
	if c := p.couples(); c != nil && len(c.things) <= exactTradeOff {
		r, err := c.cloud.Match(ctx)
		if err == nil {
			return (len(c.things) - r.LeftOut) / 2, r.Total, true
		}
	}
	g := p.newGroups(ctx, time.Now().Add(quick))
	g.begin(p)
	g.improve(3, g.late)
	return len(g.sets), g.total, len(g.sets) == 0 && p.mostGroups(g) == 0
}
