package match

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"time"

	"gatesill/fit/stats"
)

const usualRuns = 200

// MoreParts estimates how many more sets within the tolerances so many more devices
// would give, bought of the lots that the members are of.
//
// Further devices are drawn from those that take part: one of them at random,
// moved by a random multiple of the lot's own spread (in all criteria together, by
// their covariance) with the width h = (4/((d+2)·n))^(1/(d+4)) for d criteria, and
// drawn in towards the mean by 1/√(1+h²) so that the spread stays what it is; where
// the readings are whole display steps, so are the drawn ones. Of every draw the
// sets are counted, old and new devices together, and the mean gain and its range
// from the tenth to the ninetieth percent of the draws are given. That is the
// scatter between purchases from a lot like this one; that the spread of the lot is
// itself only known from n devices, and that the next lot may be another, is not in
// it.
//
// runs is the number of draws, 0: 200; the same seed gives the same result. A
// package is drawn as a whole.
//
// Errors: as of [Match]; ErrTolerance where the first criterion has none. Source:
// B. W. Silverman, Density Estimation for Statistics and Data Analysis, 1986,
// sections 4.3 and 6.4 (smoothed bootstrap; from memory). Checked: TestMoreParts.
func MoreParts(ctx context.Context, members []Member, opt Options, devices []int, runs int, seed uint64) ([]More, error) {
	if len(opt.By) == 0 || !(opt.By[0].Within > 0) {
		return nil, fmt.Errorf("%w: how many more sets there would be needs one", ErrTolerance)
	}
	opt.Aim, opt.Sets = Most, 0
	p, err := newProblem(members, opt)
	if err != nil {
		return nil, err
	}
	if len(p.used) < 3 {
		return nil, fmt.Errorf("%w: the spread of a lot needs 3 with a value, there are %d", ErrTooFew, len(p.used))
	}
	if runs <= 0 {
		runs = usualRuns
	}
	quick := 20 * time.Millisecond // where only a search can
	now, _, _ := p.countSets(ctx, quick)
	var out []More
	for _, k := range devices {
		if k < 1 {
			continue
		}
		rng := rand.New(rand.NewPCG(seed, uint64(k)))
		m := More{Devices: k, Now: now, Runs: runs, Exact: true}
		var gains []float64
		for range runs {
			if err := ctx.Err(); err != nil {
				return out, err
			}
			q := p.withMore(k, rng)
			n, _, exact := q.countSets(ctx, quick)
			m.Exact = m.Exact && exact
			gains = append(gains, math.Max(0, float64(n-now)))
		}
		slices.Sort(gains)
		m.Sets, _ = stats.MeanSD(gains)
		m.Low, m.High = gains[len(gains)/10], gains[len(gains)-1-len(gains)/10]
		m.Text = fmt.Sprintf("%s like these would give about %s of %d within %s, %.0f to %.0f in eight of ten draws.",
			plural(k, "further device"), plural(int(math.Round(m.Sets)), "more set"), p.opt.Size, volts(p.opt.By[0].Within), m.Low, m.High)
		m.Method = fmt.Sprintf("%d smoothed draws from the %d devices that take part", runs, len(p.used))
		if !m.Exact {
			m.Method += "; sets of each draw by a short search, with and without the further devices"
		}
		out = append(out, m)
	}
	return out, nil
}

// withMore is the problem with at least k further devices, drawn from its own.
func (p *problem) withMore(k int, rng *rand.Rand) *problem {
	q := *p
	q.used = slices.Clone(p.used)
	q.at, q.items = slices.Clone(p.at), slices.Clone(p.items)
	q.scaled, q.values = nil, nil
	grid := make([]int64, len(p.at[0])) // by coordinate: what drawn values are whole multiples of
	for c := range p.opt.By {
		for x := p.from[c]; x < p.from[c+1]; x++ {
			grid[x] = 1
			if !isGain(p.opt.By[c].Key) {
				grid[x] = nano / 1e6
				if p.slack(c) > 0 {
					grid[x] = int64(math.Round(p.step * nano))
				}
			}
		}
	}
	for len(q.used)-len(p.used) < k {
		it := p.items[rng.IntN(len(p.items))]
		var further item
		further.p = it.p
		var move []float64
		for _, d := range it.devices {
			same := p.sameChannel(d)
			if move == nil || p.complementary {
				move = p.smoothing(same, rng)
			}
			q.used = append(q.used, p.used[d])
			further.devices = append(further.devices, len(q.at))
			q.at = append(q.at, p.drawn(d, same, move, grid))
		}
		q.items = append(q.items, further)
	}
	q.weigh() // no wider than p by much
	return &q
}

// sameChannel lists the devices of the channel of d.
func (p *problem) sameChannel(d int) []int {
	var same []int
	for e := range p.used {
		if p.members[p.used[e]].PChannel == p.members[p.used[d]].PChannel {
			same = append(same, e)
		}
	}
	return same
}

func (p *problem) width(n int) float64 {
	d := float64(len(p.opt.By))
	return math.Pow(4/((d+2)*float64(n)), 1/(d+4))
}

// smoothing is a random vector with the covariance of the devices, times the width:
// the sum of their deviations, each with a random weight of its own.
func (p *problem) smoothing(same []int, rng *rand.Rand) []float64 {
	move := make([]float64, len(p.at[0]))
	if len(same) < 2 {
		return move
	}
	mean := p.meanOf(same)
	h := p.width(len(same)) / math.Sqrt(float64(len(same)-1))
	for _, e := range same {
		z := rng.NormFloat64() * h
		for x := range move {
			move[x] += z * (float64(p.at[e][x]) - mean[x])
		}
	}
	return move
}

func (p *problem) meanOf(same []int) []float64 {
	mean := make([]float64, len(p.at[0]))
	for _, e := range same {
		for x := range mean {
			mean[x] += float64(p.at[e][x]) / float64(len(same))
		}
	}
	return mean
}

func (p *problem) drawn(d int, same []int, move []float64, grid []int64) []int64 {
	mean := p.meanOf(same)
	h := p.width(len(same))
	in := 1 / math.Sqrt(1+h*h)
	at := make([]int64, len(move))
	for x := range at {
		v := mean[x] + in*(float64(p.at[d][x])-mean[x]+move[x])
		at[x] = grid[x] * int64(math.Round(v/float64(grid[x])))
	}
	return at
}
