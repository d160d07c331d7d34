package lot

import (
	"math"
	"math/rand/v2"
	"testing"

	"gatesill/fit"
)

// damaged makes lots of whole curves of which a share is of another gain and one
// in a hundred is otherwise damaged, and counts what is flagged and by which code.
type damaged struct {
	n, lots int
	gain    float64 // spread of the gain factor
	other   float64 // share of the lot of another gain
	times   float64 // that gain
	hurt    bool    // one in a hundred is damaged
}

type found struct {
	right, wrong, missed, split int
	missedGain, missedHurt      int
}

func (f found) precision() float64 { return float64(f.right) / float64(max(1, f.right+f.wrong)) }
func (f found) recall() float64    { return float64(f.right) / float64(max(1, f.right+f.missed)) }

// hurts are the damages, in turn.
var hurts = []func(*simDie, *Device){
	func(d *simDie, _ *Device) { d.rs += 0.2 },
	func(d *simDie, _ *Device) { d.vt += 8 * usual.vt },
	func(_ *simDie, r *Device) { r.Result.Idss.Value = 3e-4 },
	func(d *simDie, _ *Device) { d.top = 2 },
	func(d *simDie, _ *Device) { d.vt -= 8 * usual.vt },
	func(d *simDie, _ *Device) { d.knee, d.knock = 2e-2, 0.02 },
}

func (c damaged) run() (out found) {
	rng := rand.New(rand.NewPCG(uint64(c.n), 41))
	f := usual
	f.gain = c.gain
	turn := 0
	for range c.lots {
		devs := make([]Device, c.n)
		others := int(math.Round(c.other * float64(c.n)))
		odd := others
		if c.hurt {
			odd += c.n / 100
		}
		for i := range devs {
			d := f.die(rng)
			var hurt func(*simDie, *Device)
			switch {
			case i < others:
				d.beta *= c.times
			case i < odd:
				hurt = hurts[turn%len(hurts)]
				turn++
				hurt(&d, &devs[i])
			}
			devs[i] = f.read(rng, deviceName(i), &d)
			devs[i].Result.Idss = fit.Quantity{Value: 1e-7 * (1 + 0.2*rng.NormFloat64()), U: 1e-8, N: 1}
			if hurt != nil {
				hurt(&d, &devs[i]) // what it does to the result is lost in reading it
			}
		}
		s := SpreadOf(devs, SpreadOptions{TestCurrent: 1e-3})
		out.split += s.Populations - 1
		for i, v := range s.Devices {
			switch {
			case v.Flagged && i < odd:
				out.right++
			case v.Flagged:
				out.wrong++
			case i < others:
				out.missed++
				out.missedGain++
			case i < odd:
				out.missed++
				out.missedHurt++
			}
		}
	}
	return out
}

// Lots in which much is wrong at once, judged by all quantities together.
func TestDamagedDevices(t *testing.T) {
	for _, c := range []struct {
		damaged
		precision, recall float64
	}{
		{damaged{500, 12, 0.05, 0.08, 0.5, true}, 0.95, 0.95},
		{damaged{500, 12, 0.08, 0.08, 0.5, true}, 0.95, 0.95},
		{damaged{5000, 1, 0.05, 0.05, 0.7, false}, 0.95, 0.95},
		{damaged{5000, 1, 0.05, 0.05, 0.7, true}, 0.9, 0.9},
		{damaged{5000, 1, 0.08, 0.05, 0.7, false}, 0.9, 0.8}, // 4.5 spreads off: a shoulder, no gap
		{damaged{300, 20, 0.05, 0, 1, true}, 0.95, 0.95},     // 3 hurt of 300
	} {
		r := c.run()
		t.Logf("%d lots of %d, gain spread %.0f %%, %.0f %% of gain × %.1f, one in a hundred hurt %v: precision %.3f, recall %.3f (missed %d by gain, %d hurt), called two populations %d times",
			c.lots, c.n, 100*c.gain, 100*c.other, c.times, c.hurt, r.precision(), r.recall(), r.missedGain, r.missedHurt, r.split)
		if r.precision() < c.precision || r.recall() < c.recall {
			t.Errorf("precision %.3f (want %.2f), recall %.3f (want %.2f)", r.precision(), c.precision, r.recall(), c.recall)
		}
	}
}

// One bad device in a small lot: gain × 0.5 and threshold 6 sd up together.
func TestOneBadOfFew(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 41))
	var past []Spread
	for range 3 {
		past = append(past, SpreadOf(usual.lot(rng, 25, nil), SpreadOptions{}))
	}
	known := Pool(past)
	for _, c := range []struct {
		n    int
		want float64
	}{{5, 0.99}, {7, 0.99}, {8, 0.8}, {10, 0.95}, {20, 0.99}} {
		hit, wrong, runs := 0, 0, 400
		for range runs {
			s := SpreadOf(usual.lot(rng, c.n, func(i int, d *simDie) {
				if i == 0 {
					d.beta *= 0.5
					d.vt += 6 * usual.vt
				}
			}), SpreadOptions{Known: known})
			for i, v := range s.Devices {
				switch {
				case v.Flagged && i == 0:
					hit++
				case v.Flagged:
					wrong++
				}
			}
		}
		t.Logf("one of %d: found %.1f %%, others flagged %.2f a lot", c.n, 100*float64(hit)/float64(runs), float64(wrong)/float64(runs))
		if float64(hit) < c.want*float64(runs) || wrong > runs/20 {
			t.Errorf("one of %d: found %d, wrong %d of %d", c.n, hit, wrong, runs)
		}
	}
}
