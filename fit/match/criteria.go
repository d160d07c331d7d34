package match

import (
	"fmt"
	"math"
	"slices"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/fit/stats"
)

// nano is how many units of difference make one volt, or one neper of a gain.
const nano = 1e9

// noLimit is the tolerance of a criterion without one.
const noLimit = math.MaxInt64

// beyond is the distance of two devices that must not be in one set.
const beyond = int64(1) << 55

// problem is what is left of the members and options once every value is a whole
// number: devices that take part, items that cannot be parted, and criteria.
type problem struct {
	members  []Member
	opt      Options
	used     []int       // by device that takes part: its index in members
	values   [][]float64 // by device, by criterion: as measured
	u        [][]float64 // by device, by criterion, in the unit of the spread; NaN: not known
	at       [][]int64   // by device: coordinates of all criteria, one after the other, unweighted
	scaled   [][]int64   // by device: the same in nanovolts of distance; those of a mere limit are 0
	from     []int       // by criterion: its first coordinate, and one more at the end
	limit    []int64     // by criterion: greatest difference
	currents []float64   // A, of KeyCurve
	step     float64     // V
	coarsest float64     // V
	items    []item
	left     []LeftOver // devices that do not take part

	complementary bool
}

// item is devices that are never parted.
type item struct {
	devices []int // of those that take part
	p       int   // how many of them are p-channel
}

func isVoltage(k fit.Key) bool {
	return k == fit.KeyVgsth || k == fit.KeyVgsIdle || k == fit.KeyVt
}

func isGain(k fit.Key) bool {
	return k == fit.KeyBeta || k == fit.KeyGmMax || k == fit.KeyGmIdle
}

func known(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// settle fills in what the options leave open and refuses what cannot be.
func settle(opt Options) (Options, error) {
	if opt.Size == 0 {
		opt.Size = 2
	}
	if opt.Size < 2 || opt.Size > 64 {
		return opt, fmt.Errorf("%w: %d devices in a set", ErrSize, opt.Size)
	}
	if len(opt.By) == 0 {
		opt.By = []Criterion{{Key: fit.KeyVgsIdle}}
	}
	opt.By = slices.Clone(opt.By)
	for i := range opt.By {
		c := &opt.By[i]
		switch {
		case i == 0 && !isVoltage(c.Key) && c.Key != KeyCurve:
			return opt, fmt.Errorf("%w: %s comes first, but distances are in volts: begin with a gate voltage or the curve", ErrCriteria, c.Key)
		case !isVoltage(c.Key) && !isGain(c.Key) && c.Key != KeyCurve:
			return opt, fmt.Errorf("%w: devices are not matched by %s", ErrCriteria, c.Key)
		case slices.ContainsFunc(opt.By[:i], func(d Criterion) bool { return d.Key == c.Key }):
			return opt, fmt.Errorf("%w: %s is named twice", ErrCriteria, c.Key)
		case c.Within < 0 || math.IsInf(c.Within, 0) || c.Within > 1e3:
			return opt, fmt.Errorf("%w: %s within %g", ErrTolerance, c.Key, c.Within)
		case c.Weight < 0 || !known(c.Weight):
			return opt, fmt.Errorf("%w: %g for %s", ErrWeights, c.Weight, c.Key)
		}
		if math.IsNaN(c.Within) {
			c.Within = 0
		}
		if i == 0 && c.Weight == 0 {
			c.Weight = 1
		}
		if i > 0 && c.Weight > 0 && (c.Within == 0 || opt.By[0].Within == 0) {
			return opt, fmt.Errorf("%w: that of %s needs a tolerance of %s and one of %s, which say how many volts it is worth", ErrWeights, c.Key, opt.By[0].Key, c.Key)
		}
	}
	if opt.Aim == "" {
		opt.Aim = Total
		if opt.Sets > 0 {
			opt.Aim = Best
		} else if opt.By[0].Within > 0 {
			opt.Aim = Most
		}
	}
	switch {
	case !slices.Contains([]Aim{Most, Total, Worst, Best}, opt.Aim):
		return opt, fmt.Errorf("%w: %q", ErrAim, opt.Aim)
	case opt.Aim == Most && opt.By[0].Within == 0:
		return opt, fmt.Errorf("%w: as many sets as possible needs one for %s", ErrTolerance, opt.By[0].Key)
	case opt.Aim == Best && opt.Sets < 1:
		return opt, fmt.Errorf("%w: %d sets wanted", ErrSize, opt.Sets)
	}
	if !(opt.At > 0) || math.IsInf(opt.At, 0) {
		opt.At = math.NaN()
	}
	if !(opt.SourceResistor > 0) || math.IsInf(opt.SourceResistor, 0) {
		opt.SourceResistor = 0
	}
	return opt, nil
}

// limits reports whether a set beyond a tolerance is refused, not only marked.
func (p *problem) limits() bool { return p.opt.Aim == Most || p.opt.Aim == Best }

// newProblem reads the members.
func newProblem(members []Member, opt Options) (*problem, error) {
	opt, err := settle(opt)
	if err != nil {
		return nil, err
	}
	p := &problem{members: members, opt: opt}
	why := make([]string, len(members))
	n, pch := 0, 0
	for i := range members {
		if why[i] = notOffered(&members[i]); why[i] == "" {
			n++
			if members[i].PChannel {
				pch++
			}
		}
	}
	p.complementary = pch > 0 && pch < n
	if p.complementary && opt.Size%2 == 1 {
		return nil, fmt.Errorf("%w: n-channel and p-channel devices go together one to one, so a set cannot have %d", ErrSize, opt.Size)
	}
	if err := p.chooseCurrents(why); err != nil {
		return nil, err
	}
	for i := range members {
		if why[i] == "" {
			_, _, why[i] = p.read(i)
		}
	}
	p.packages(why)
	p.convert()
	if !p.weigh() {
		return nil, fmt.Errorf("%w: with them differences come to more than %g V, too much to be summed up in whole nanovolts", ErrWeights, float64(mostDistance)/nano)
	}
	return p, nil
}

// loose reports whether every device stands alone.
func (p *problem) loose() bool { return len(p.items) == len(p.used) }

// convert turns values into whole numbers.
func (p *problem) convert() {
	by := p.opt.By
	for d, i := range p.used {
		values, u, _ := p.read(i)
		p.values, p.u = append(p.values, values), append(p.u, u)
		m := &p.members[i]
		sign := 1.0
		if m.PChannel {
			sign = -1
		}
		var at []int64
		for c := range by {
			if d == 0 {
				p.from = append(p.from, len(at))
			}
			switch {
			case by[c].Key == KeyCurve:
				for _, cur := range p.currents {
					l, _ := levelAt(&m.Result, cur)
					at = append(at, microvolts(sign*l.Vg))
				}
			case isGain(by[c].Key):
				at = append(at, int64(math.Round(nano*math.Log(math.Abs(values[c])))))
			default:
				at = append(at, microvolts(sign*values[c]))
			}
		}
		if d == 0 {
			p.from = append(p.from, len(at))
		}
		p.at = append(p.at, at)
	}
	if len(p.used) == 0 {
		p.from = make([]int, len(by)+1)
	}
	p.findStep()
	p.limit = make([]int64, len(by))
	for c := range by {
		p.limit[c] = p.limitOf(c, by[c].Within)
	}
}

func microvolts(v float64) int64 { return int64(math.Round(v*1e6)) * (nano / 1e6) }

// findStep finds the smallest and the greatest display step of the devices.
func (p *problem) findStep() {
	for _, i := range p.used {
		s := p.members[i].Step
		if s > 0 && known(s) {
			p.coarsest = max(p.coarsest, s)
			if p.step == 0 || s < p.step {
				p.step = s
			}
		}
	}
}

// slack is by how much a difference may exceed a tolerance for the way in which
// numbers are displayed: just less than half a step where every value is a whole
// number of steps, so that 2.81 V - 2.78 V is 0.03 V and 0.04 V is not; none where
// values were read between the steps.
func (p *problem) slack(c int) int64 {
	if p.opt.By[c].Key == KeyCurve || p.step == 0 {
		return 0
	}
	for d := range p.values {
		x := p.values[d][c] / p.step
		if math.Abs(x-math.Round(x)) > 0.01 {
			return 0
		}
	}
	return max(0, int64(math.Round(p.step*nano/2))-1)
}

// limitOf is a tolerance of a criterion as a whole number, with its slack.
func (p *problem) limitOf(c int, within float64) int64 {
	switch {
	case !(within > 0):
		return noLimit
	case isGain(p.opt.By[c].Key):
		return int64(math.Round(nano*math.Log1p(within))) + 1 // of rounding
	}
	return int64(math.Round(within*nano)) + p.slack(c)
}

// mostDistance is the greatest distance that is summed up.
const mostDistance = int64(1e12)

// weigh makes the coordinates of the distance; false: they are too great.
func (p *problem) weigh() bool {
	by := p.opt.By
	worth := make([]float64, len(by)) // volts (as units) of distance for a unit of difference
	for c := range by {
		switch {
		case c == 0:
			worth[c] = 1
		case by[c].Weight > 0:
			t := by[c].Within
			if isGain(by[c].Key) {
				t = math.Log1p(t)
			}
			worth[c] = by[c].Weight / by[0].Weight * by[0].Within / t
		}
	}
	for d := range p.at {
		s := make([]int64, len(p.at[d]))
		for c := range by {
			for k := p.from[c]; k < p.from[c+1]; k++ {
				if worth[c] == 1 {
					s[k] = p.at[d][k]
				} else if worth[c] > 0 {
					x := worth[c] * float64(p.at[d][k]-p.at[0][k])
					if !(math.Abs(x) < float64(mostDistance)) {
						return false
					}
					s[k] = int64(math.Round(x))
				}
			}
		}
		p.scaled = append(p.scaled, s)
	}
	return len(p.used) == 0 || p.reach() < mostDistance
}

// part is the difference of two devices in one criterion, of coordinates x.
func (p *problem) part(x [][]int64, c, i, j int) int64 {
	var d int64
	for k := p.from[c]; k < p.from[c+1]; k++ {
		d = max(d, x[i][k]-x[j][k], x[j][k]-x[i][k])
	}
	return d
}

// distance of two devices, nV: the difference in the first criterion and the
// weighted ones of the others.
func (p *problem) distance(i, j int) int64 {
	var d int64
	for c := range p.opt.By {
		d += p.part(p.scaled, c, i, j)
	}
	return d
}

// inside reports whether no criterion parts two devices by more than its tolerance.
func (p *problem) inside(i, j int) bool {
	for c, most := range p.limit {
		if most != noLimit && p.part(p.at, c, i, j) > most {
			return false
		}
	}
	return true
}

// together is the distance of two devices that may be in one set, beyond for
// others.
func (p *problem) together(i, j int) int64 {
	if p.limits() && !p.inside(i, j) {
		return beyond
	}
	return p.distance(i, j)
}

// metric is together in the form in which it is quick for two single numbers, the
// commonest case where there are many devices.
func (p *problem) metric() func(i, j int) int64 {
	if len(p.opt.By) != 2 || p.from[2] != 2 {
		return p.together
	}
	type place struct{ x, y, sx, sy int64 }
	at := make([]place, len(p.at))
	for d := range at {
		at[d] = place{p.at[d][0], p.at[d][1], p.scaled[d][0], p.scaled[d][1]}
	}
	limits, limX, limY := p.limits(), p.limit[0], p.limit[1]
	return func(i, j int) int64 {
		a, b := &at[i], &at[j]
		if limits && (absolute(a.x-b.x) > limX || absolute(a.y-b.y) > limY) {
			return beyond
		}
		return absolute(a.sx-b.sx) + absolute(a.sy-b.sy)
	}
}

func absolute(x int64) int64 { return max(x, -x) }

// oneQuantity reports whether devices differ by a single number.
func (p *problem) oneQuantity() bool { return len(p.opt.By) == 1 && p.from[len(p.from)-1] <= 1 }

// median of a quantity over the devices that take part, by magnitude; NaN: none has it.
func (p *problem) median(k fit.Key) float64 {
	var x []float64
	for _, i := range p.used {
		if v, _, _ := lot.Read(&p.members[i].Result, k); known(v) {
			x = append(x, math.Abs(v))
		}
	}
	if len(x) == 0 {
		return math.NaN()
	}
	return stats.Median(x)
}
