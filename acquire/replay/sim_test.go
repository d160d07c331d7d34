package replay

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
	"time"

	"gatesill/acquire/table"
)

// The bench of this file is invented: a device with a smooth turn-on, fed by hand
// in steps through a load resistor, read by handheld meters whose logs have clocks
// of their own. It checks that known clock errors are found again; it is no check
// against a real bench.
type bench struct {
	knots [][2]float64 // time, gate voltage: straight between
	noise *rand.Rand
	vth   func(at float64) float64
}

const (
	simRL  = 5.0
	simVDD = 12.0
)

func (b *bench) gate(at float64) float64 {
	lo, hi := 0, len(b.knots)-1
	if at <= b.knots[0][0] {
		return b.knots[0][1]
	}
	if at >= b.knots[hi][0] {
		return b.knots[hi][1]
	}
	for hi-lo > 1 {
		if m := (lo + hi) / 2; b.knots[m][0] <= at {
			lo = m
		} else {
			hi = m
		}
	}
	a, z := b.knots[lo], b.knots[hi]
	return a[1] + (at-a[0])/(z[0]-a[0])*(z[1]-a[1])
}

func (b *bench) current(at float64) float64 {
	const n, ut, k = 1.6, 0.0259, 2.0
	x := math.Log1p(math.Exp((b.gate(at) - b.vth(at)) / (2 * n * ut)))
	i := k * (2 * n * ut) * (2 * n * ut) / 2 * x * x
	return min(i, simVDD/simRL*0.98)
}

// staircase goes up in steps by hand, down again, off, and the next device goes in.
func staircase(r *rand.Rand, devices int, minutes float64) *bench {
	b := &bench{noise: r}
	at := 5.0
	add := func(dt, v float64) {
		at += dt
		b.knots = append(b.knots, [2]float64{at, v})
	}
	add(0, 0)
	var swaps []float64
	each := minutes * 60 / float64(devices)
	for range devices {
		end := at + each
		add(8+4*r.Float64(), 0)
		for v, up := 2.6, true; at < end-10; {
			add(0.4+1.2*r.Float64(), v) // the hand on the knob
			add(2.4+1.2*r.Float64(), v)
			if v >= 3.3 {
				up = false
			}
			if v <= 2.6 && !up {
				if at+120 > end {
					break
				}
				up = true
			}
			step := 0.05 * (0.8 + 0.4*r.Float64())
			if !up {
				step = -step
			}
			v = max(2.6, min(3.3, v+step))
		}
		add(0.5, 0)
		add(6, 0)
		swaps = append(swaps, at)
	}
	shift := make([]float64, devices)
	for i := range shift {
		shift[i] = 3 + 0.1*r.NormFloat64()
	}
	b.vth = func(at float64) float64 {
		for i, s := range swaps {
			if at < s-3 {
				return shift[i]
			}
		}
		return shift[devices-1]
	}
	return b
}

func (b *bench) end() float64 { return b.knots[len(b.knots)-1][0] + 5 }

// simLog is one meter of the bench.
type simLog struct {
	cycle, offset, ppm float64 // s; the clock shows true + offset + ppm of the elapsed time
	digit              float64
	read               func(at float64) float64
	form               func(at float64) string
	unit               string
	dropped            bool // zeros at the end of a number are not written
}

var simStart = time.Date(2026, 5, 20, 10, 0, 0, 0, time.UTC)

func isoUTC(at float64) string {
	return simStart.Add(time.Duration(at * 1e9)).Format("2006-01-02T15:04:05.000Z")
}

// text writes the log of the meter: mean over 100 ms of integration, 50 ms later
// it is stamped.
func (b *bench) text(m simLog) string {
	var s strings.Builder
	s.WriteString("# invented readings of an invented bench\ntime,reading,unit\n")
	for at := m.cycle * b.noise.Float64(); at < b.end(); at += m.cycle * (0.97 + 0.06*b.noise.Float64()) {
		sum := 0.0
		for k := range 10 {
			sum += m.read(at-0.1+0.01*float64(k)) / 10
		}
		v := math.Round((sum+0.3*m.digit*b.noise.NormFloat64())/m.digit)*m.digit + 0
		stampAt := at + 0.05
		places := int(math.Round(-math.Log10(m.digit)))
		text := strconv.FormatFloat(v+0, 'f', places, 64)
		if m.dropped {
			text = strconv.FormatFloat(v+0, 'g', 6, 64)
		}
		fmt.Fprintf(&s, "%s,%s,%s\n", m.form(stampAt+m.offset+m.ppm*1e-6*stampAt), text, m.unit)
	}
	return s.String()
}

// meters gives the three handhelds of the bench.
func (b *bench) meters() map[string]simLog {
	return map[string]simLog{
		"gate":    {cycle: 0.3, digit: 1e-3, read: b.gate, form: isoUTC, unit: "V"},
		"current": {cycle: 0.4, digit: 1e-5, read: b.current, form: isoUTC, unit: "A"},
		"load":    {cycle: 0.25, digit: 1e-4, read: func(at float64) float64 { return simRL * b.current(at) }, form: isoUTC, unit: "V"},
	}
}

func (b *bench) logs(t *testing.T, ms map[string]simLog, opt Options) []*Log {
	t.Helper()
	var out []*Log
	for _, role := range Roles {
		m, ok := ms[role]
		if !ok {
			continue
		}
		text, err := table.TextOf(role+".csv", []byte(b.text(m)), opt.Table)
		if err != nil {
			t.Fatal(err)
		}
		l, err := readLog(text, role+".csv", role, opt)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, l)
	}
	return out
}

// clockError is how far the found clock of a log is off the true one at a time.
func clockError(s *Session, ms map[string]simLog, role string, at float64) float64 {
	ref := ms["current"]
	m := ms[role]
	for _, l := range s.Logs {
		if l.Role != role {
			continue
		}
		shown := float64(simStart.Unix()) + at + m.offset + m.ppm*1e-6*at
		want := float64(simStart.Unix()) + at + ref.offset + ref.ppm*1e-6*at
		return l.Found.Clock.Correct(shown) - want
	}
	return math.NaN()
}

func TestClocksAreFoundAgain(t *testing.T) {
	seeds := 1
	if long {
		seeds = 24
	}
	var worst = map[string]float64{}
	var worstPPM = map[string]float64{}
	inBound, n := 0, 0
	for seed := range seeds {
		r := rand.New(rand.NewPCG(uint64(seed), 7))
		b := staircase(r, 6, 30)
		ms := b.meters()
		for _, role := range []string{"gate", "current", "load"} {
			m := ms[role]
			m.offset, m.ppm = 60*r.Float64()-30, 400*r.Float64()-200
			ms[role] = m
		}
		began := time.Now()
		s, err := Join(b.logs(t, ms, Options{}), nil, nil, Options{})
		if err != nil {
			t.Fatal(err)
		}
		for _, role := range []string{"gate", "load"} {
			var c *Clock
			for _, l := range s.Logs {
				if l.Role == role {
					c = l.Found.Clock
				}
			}
			e := math.Max(math.Abs(clockError(s, ms, role, 10)), math.Abs(clockError(s, ms, role, b.end()-10)))
			m := math.Abs(clockError(s, ms, role, b.end()/2))
			trueDrift := (1+ms["current"].ppm*1e-6)/(1+ms[role].ppm*1e-6) - 1
			d := math.Abs(c.Drift - trueDrift*1e6)
			worst[role], worst[role+" ends"] = max(worst[role], m), max(worst[role+" ends"], e)
			worstPPM[role] = max(worstPPM[role], d)
			n++
			if e <= c.Bound {
				inBound++
			}
			t.Logf("seed %d %s: offset %.3f s, error %.1f ms in the middle, %.1f ms at the ends, u %.1f ms, bound %.1f ms; drift %.1f ppm, error %.1f, u %.1f; %v", seed, role, c.Offset, m*1e3, e*1e3, c.OffsetU*1e3, c.Bound*1e3, c.Drift, d, c.DriftU, time.Since(began).Round(time.Millisecond))
			if c.Assumed || m > 0.05 || d > 20 {
				t.Errorf("seed %d %s: error %.3f s, drift off by %.1f ppm, %s", seed, role, m, d, c.Why)
			}
		}
	}
	t.Logf("worst: %v s, %v ppm; within the bound %d of %d", worst, worstPPM, inBound, n)
	if inBound < n*9/10 {
		t.Errorf("the bound held in %d of %d", inBound, n)
	}
}
