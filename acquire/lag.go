package acquire

import (
	"errors"
	"fmt"
	"math"

	"gatesill/store/record"
)

// ErrLag is wrapped by every error of [FindLag].
var ErrLag = errors.New("no lag found")

const (
	lagReach   = 0.5   // s, to either side
	lagGrid    = 10e-3 // s
	lagDegree  = 5     // of the polynomial
	lagPoints  = 10    // of each ramp
	lagMost    = 800   // of each ramp that are used
	lagCounts  = 20    // of the current: below that its digits decide
	lagVaguest = 50e-3 // s, standard uncertainty from which on nothing was found
)

// FindLag finds by how much the meter of the current lags behind that of the gate, from
// one ramp up and one down through the same gate voltages: with the right lag both give the
// same curve. Nothing need be known of the device; that it is at low power is for the
// caller to see to, for a part that warms up opens a loop of its own.
//
// The lag, s, is what is still to be added to Timing.Lag of the meter of the current (or to be
// taken off that of the gate); u is its standard uncertainty, s. It is where the residual of one
// polynomial of degree 5, V_G in ln I, through the points of both ramps is least: a grid of 10 ms
// over ±0.5 s, then a parabola. u is from the curvature of the sum of squares there and, as it
// cannot be told from a lag, from the batching of the adapters not being even (half of it,
// rectangular).
//
// Errors wrap [ErrLag]: too few points, ramps of one direction, no common currents, the least
// residual at the end of the grid, or ramps too slow to tell.
//
// Checked: TestFindLag, in simulation.
func FindLag(up, down []record.Reading, p Pairing) (lag, u float64, err error) {
	a, err := lagRamp("up", up, p)
	if err != nil {
		return 0, 0, err
	}
	b, err := lagRamp("down", down, p)
	if err != nil {
		return 0, 0, err
	}
	if a.rise*b.rise >= 0 {
		return 0, 0, fmt.Errorf("both ramps go the same way (%+.3g V and %+.3g V): %w", a.rise, b.rise, ErrLag)
	}
	lo, hi := math.Max(a.lo, b.lo), math.Min(a.hi, b.hi)
	if !(hi-lo > math.Ln2) {
		return 0, 0, fmt.Errorf("the ramps have less than an octave of current in common: %w", ErrLag)
	}
	residual := func(lag float64) (square float64, n int) { return curveResidual([]lagged{a, b}, lag, lo, hi) }
	steps := int(math.Round(2 * lagReach / lagGrid))
	best, least := -1, math.Inf(1)
	for k := range steps + 1 {
		s, n := residual(float64(k)*lagGrid - lagReach)
		if n < 2*lagPoints {
			return 0, 0, fmt.Errorf("%d points are on both ramps, %d needed: %w", n, 2*lagPoints, ErrLag)
		}
		if v := s / float64(n-lagDegree-2); v < least {
			best, least = k, v
		}
	}
	if best <= 0 || best >= steps {
		return 0, 0, fmt.Errorf("the curves still come nearer at %.2g s: %w", float64(best)*lagGrid-lagReach, ErrLag)
	}
	// Newton's steps on the mean residual, by differences over three grid steps: points
	// come and go at the ends.
	lag = float64(best)*lagGrid - lagReach
	curvature := 0.0
	for range 4 {
		const h = 3 * lagGrid
		_, n := residual(lag)
		scaled := func(x float64) float64 {
			s, k := residual(x)
			return s * float64(n-lagDegree-2) / float64(k-lagDegree-2)
		}
		s0, sm, sp := scaled(lag), scaled(lag-h), scaled(lag+h)
		if curvature = (sm - 2*s0 + sp) / (h * h); !(curvature > 0) {
			return 0, 0, fmt.Errorf("the curves do not come nearer at any lag: %w", ErrLag)
		}
		lag += math.Max(-lagGrid, math.Min(lagGrid, (sm-sp)/(2*h)/curvature))
		least = s0 / float64(n-lagDegree-2)
	}
	// Points between the same two readings of the gate share their rounding.
	_, n := residual(lag)
	least *= math.Max(1, float64(n)/float64(len(a.gate.convs)+len(b.gate.convs)))
	jitter := math.Max(a.gate.timing.Jitter, a.pace.timing.Jitter) / 2
	u = math.Hypot(math.Sqrt(2*least/curvature), jitter/math.Sqrt(3))
	if u > lagVaguest {
		return 0, 0, fmt.Errorf("known to %.2g s only, the ramps are too slow or too short: %w", u, ErrLag)
	}
	return lag, u, nil
}

// lagged is one ramp.
type lagged struct {
	gate, pace *channel
	rise       float64 // V, of the gate from the first to the last reading
	lo, hi     float64 // ln of the least and the greatest current used
	points     []lagPoint
}

type lagPoint struct {
	t float64 // s
	x float64 // ln of the current
}

func lagRamp(name string, readings []record.Reading, p Pairing) (lagged, error) {
	q := NewPairer(p)
	for _, r := range readings {
		if !math.IsNaN(r.At) {
			q.channel(r.Role).add(r)
		}
	}
	r := lagged{gate: q.channels[Gate], pace: q.pace(), lo: math.Inf(1), hi: math.Inf(-1)}
	if r.gate == nil || r.pace == nil || r.pace == r.gate || len(r.gate.convs) < 4 {
		return r, fmt.Errorf("ramp %s: readings of the gate and of the current are needed: %w", name, ErrLag)
	}
	if r.gate.sameLine(r.pace) {
		return r, fmt.Errorf("ramp %s: gate and current are columns of one line: %w", name, ErrLag)
	}
	first, last := math.NaN(), math.NaN()
	for i := range r.gate.convs {
		if c := &r.gate.convs[i]; c.number() {
			if math.IsNaN(first) {
				first = c.v
			}
			last = c.v
		}
	}
	r.rise = last - first
	for i := range r.pace.convs {
		c := &r.pace.convs[i]
		if c.number() && c.v != 0 && math.Abs(c.v) >= lagCounts*c.digit {
			x := math.Log(math.Abs(c.v))
			r.lo, r.hi = math.Min(r.lo, x), math.Max(r.hi, x)
			r.points = append(r.points, lagPoint{c.t, x})
		}
	}
	if n := len(r.points); n < lagPoints {
		return r, fmt.Errorf("ramp %s: %d readings of the current, %d needed: %w", name, n, lagPoints, ErrLag)
	}
	// More than four between two readings of the gate say nothing new, nor do thousands.
	if step := (len(r.points) + r.most() - 1) / r.most(); step > 1 {
		few := r.points[:0]
		for i := 0; i < len(r.points); i += step {
			few = append(few, r.points[i])
		}
		r.points = few
	}
	return r, nil
}

func (r *lagged) most() int { return max(lagPoints, min(4*len(r.gate.convs), lagMost)) }

// curveResidual is the sum of squares, V², that a polynomial through the points of all
// ramps leaves when the current is taken to be lag s older than it says, and
// the number of points; currents from lo to hi, logarithms.
func curveResidual(ramps []lagged, lag, lo, hi float64) (square float64, n int) {
	var sums normal
	var basis [lagDegree + 1]float64
	mean := 0.0
	for pass := range 2 {
		n = 0
		for _, r := range ramps {
			for _, c := range r.points {
				if c.x < lo || c.x > hi {
					continue
				}
				t := c.t - lag
				j := r.gate.from(t)
				if j == 0 || j == len(r.gate.convs) {
					continue
				}
				a, b := &r.gate.convs[j-1], &r.gate.convs[j]
				if !a.number() || !b.number() || !b.whole {
					continue
				}
				n++
				v := line(a, b, t)
				if pass == 0 {
					mean += v
					continue
				}
				v -= mean // keeps the digits in the difference below
				z := 2*(c.x-lo)/(hi-lo) - 1
				basis[0], basis[1] = 1, z
				for p := 2; p <= lagDegree; p++ { // Chebyshev's, which keep the sums well conditioned
					basis[p] = 2*z*basis[p-1] - basis[p-2]
				}
				sums.add(basis[:], v)
			}
		}
		if pass == 0 && n > 0 {
			mean /= float64(n)
		}
	}
	_, _, square = sums.solve()
	return square, n
}
