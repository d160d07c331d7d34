// Package invented makes sheets of invented lots for the tests of layouts and
// plots: devices after a plain square law with a soft knee, a written seed, and
// one device of every odd kind.
//
// Nothing in it was measured, and its numbers are good for laying out only: it
// is imported by tests and by nothing else.
package invented

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/report"
	"gatesill/store/record"
)

// Options choose the lot.
type Options struct {
	Devices  int
	Points   int  // a sweep
	PChannel bool // signs of a p-channel part
	Spots    bool // one point a device at 10 mA, no curves
	Clean    bool // every device measured, none flagged
	Seed     uint64
	Lot      string  // its name; "": 2612
	Shift    float64 // V, of every threshold, for a lot to compare with another
}

const (
	test = 1e-3 // A, test current of the invented part
	idle = 0.25 // A, its idle current
)

// current is the invented device equation: beta/2 times the square of a softly
// limited overdrive, bent by a source resistance.
func current(vg, vt, beta float64) float64 {
	const knee = 0.06 // V
	v := knee * math.Log1p(math.Exp((vg-vt)/knee))
	return beta / 2 * v * v / (1 + 0.15*v)
}

// gateFor inverts current by bisection.
func gateFor(i, vt, beta float64) float64 {
	lo, hi := vt-5, vt+20
	for range 80 {
		mid := (lo + hi) / 2
		if current(mid, vt, beta) < i {
			lo = mid
		} else {
			hi = mid
		}
	}
	return (lo + hi) / 2
}

// Lot makes an invented lot.
func Lot(o Options) report.Sheet {
	rng := rand.New(rand.NewPCG(o.Seed, 20))
	sign := 1.0
	part := record.NewPart("XR-90 (invented)")
	if o.PChannel {
		part = record.NewPart("XR-90P (invented)")
		part.Channel = record.PChannel
		sign = -1
	}
	part.TestCurrent, part.IdleCurrent = record.Known(test), record.Known(idle)
	part.VgsthMin, part.VgsthMax = record.Known(math.Min(sign*2, sign*4)), record.Known(math.Max(sign*2, sign*4))
	part.MaxVgs, part.MaxVds, part.MaxID, part.MaxPD = record.Known(20), record.Known(65), record.Known(4), record.Known(60)
	s := report.Sheet{
		Part: part,
		Lot: record.Lot{
			ID: "0190aaaa-0000-7000-8000-000000000001", Name: "2612", Supplier: "Invented Parts Ltd", DateCode: "2612",
			Marking: "XR90", Quantity: record.Known(float64(o.Devices * 4)), Sampled: "every fourth part of the tubes, in tube order",
			Margin: record.Amount{Value: 0.05, Unit: "V"}, MarginSetAt: "2026-05-02T08:00:00.000Z",
			CreatedAt: "2026-05-02T08:10:00.000Z", DevicesCount: o.Devices, SweepsCount: o.Devices,
		},
		Sources:  []record.Source{{ID: "0190aaaa-0000-7000-8000-00000000000a", Name: "lot2612.csv", Hash: fmt.Sprintf("%064x", o.Seed+77), Size: 81234, Layout: "long", ImportedAt: "2026-05-04T10:00:00.000Z"}},
		Sessions: []record.Session{{ID: "0190aaaa-0000-7000-8000-00000000000b", Name: "Monday morning", Bench: "left bench", Operator: "R. Example", Fixture: "clamp 2", Ambient: record.Known(22.5), StartedAt: "2026-05-04T07:30:00.000Z"}},
		SortedBy: fit.KeyVgsIdle, TestCurrent: test, TestBasis: "part", IdleCurrent: idle,
		Version: "0.1.0", Hash: fmt.Sprintf("%064x", o.Seed*7919+12345), Latest: "2026-05-04T10:00:00.000Z",
	}
	if o.Lot != "" {
		s.Lot.Name = o.Lot
	}
	if o.Spots {
		s.SortedBy, s.TestCurrent, s.TestBasis, s.IdleCurrent = fit.KeyVgsth, 0.01, "spot list", math.NaN()
		s.Part.IdleCurrent, s.Part.TestCurrent = record.Num{}, record.Num{}
	}
	odd := map[int]fit.State{}
	if !o.Clean && o.Devices >= 8 {
		n := o.Devices
		odd = map[int]fit.State{n / 5: fit.Above, n/5 + 1: fit.Shorted, n / 3: fit.Open, n/3 + 1: fit.Declined, n / 2: fit.Excluded, n/2 + 1: fit.WrongWayRound}
		if o.Devices < 20 {
			odd = map[int]fit.State{n / 3: fit.Open, n / 2: fit.Above}
		}
	}
	width := len(fmt.Sprint(o.Devices))
	for i := range o.Devices {
		vt, beta := 3.02+o.Shift+0.065*rng.NormFloat64(), 3.8*(1+0.03*rng.NormFloat64())
		reasons := []lot.Reason{}
		name := fmt.Sprintf("D%0*d", width, i+1)
		if !o.Clean {
			switch {
			case i == o.Devices*2/3:
				vt -= 0.52
				reasons = append(reasons, lot.Reason{Code: fit.CodeOffFamilyThreshold, Text: "V_GS at the idle current lies 7.9 robust standard deviations below the median of the lot."})
			case i == o.Devices*3/4 && o.Devices > 8:
				beta *= 0.55
				reasons = append(reasons, lot.Reason{Code: fit.CodeOffFamilyGain, Text: "The transconductance at the idle current is 26 % below the median of the lot at a usual threshold: perhaps another die."})
			}
		}
		d := device(o, &s, i, name, odd[i], vt, beta, sign, rng)
		switch odd[i] {
		case fit.Open, fit.Shorted, fit.WrongWayRound:
			reasons = append(reasons, lot.Reason{Code: string(odd[i]), Text: d.Result.Why})
		}
		s.Devices = append(s.Devices, d)
		if !d.Excluded {
			s.Spread.Devices = append(s.Spread.Devices, lot.Verdict{Name: name, Flagged: len(reasons) > 0, Reasons: reasons})
		}
	}
	spread(&s)
	sorting(&s, o)
	return s
}

func device(o Options, s *report.Sheet, i int, name string, state fit.State, vt, beta, sign float64, rng *rand.Rand) report.Device {
	d := report.Device{Device: record.Device{ID: fmt.Sprintf("0190aaaa-0000-7000-8001-%012d", i), Name: name, Role: record.Sample, DateCode: "2612"}}
	if state == "" {
		state = fit.Measured
	}
	c := sweep(o, state, vt, beta, sign, rng)
	r := fit.NewResult()
	r.State = state
	u := 0.0004 + 0.0003*rng.Float64()
	value := func(x, u float64, n int) fit.Quantity {
		return fit.Quantity{Value: sign * x, U: u, UBetween: 2 * u, UAbsolute: 0.0088, N: n}
	}
	switch state {
	case fit.Measured, fit.Excluded:
		if o.Spots {
			q := value(math.Round(gateFor(0.01, vt, beta)*100)/100, 0.0029, 1)
			r.Vgsth, r.Method = q, "current"
			r.Warnings = append(r.Warnings, fit.Warning{Code: fit.CodeSpotOnly, Text: "One reading, no curve: nothing can be said of gain, leakage or heating."})
			break
		}
		r.Vgsth = value(gateFor(test, vt, beta), u, 4)
		r.VgsIdle = value(gateFor(idle, vt, beta), u*1.4, 4)
		for _, i := range fit.LevelCurrents {
			if i <= current(4, vt, beta) && i <= 1.2 {
				r.Levels = append(r.Levels, fit.Level{I: i, Vg: sign * gateFor(i, vt, beta), U: u})
			}
		}
		r.Vt = value(vt+0.003, u*2, 9)
		r.Method = "sqrt"
		r.Beta = fit.Quantity{Value: beta, U: beta * 0.004, UBetween: beta * 0.006, UAbsolute: beta * 0.012, N: 9}
		gm := (current(gateFor(idle, vt, beta)+1e-4, vt, beta) - idle) / 1e-4
		r.GmIdle = fit.Quantity{Value: gm, U: gm * 0.01, UBetween: gm * 0.015, UAbsolute: gm * 0.02, N: 7}
		r.Idss = fit.Quantity{Value: sign * 2e-6 * (1 + rng.Float64()), U: 3e-7, UBetween: 5e-7, UAbsolute: 1e-6, N: 3}
		r.Warnings = append(r.Warnings, fit.Warning{Code: fit.CodeHeatingNotChecked, Text: "Only one sweep was taken: whether the device warmed up was not checked."})
		if i%17 == 3 {
			k := o.Points / 2
			c.Id[k] *= 10
			r.LeftOut = append(r.LeftOut, fit.LeftOut{Index: k, Code: fit.CodeDecadeSpike, Text: "The current is ten times what its neighbours say."})
			r.Warnings = append(r.Warnings, fit.Warning{Code: fit.CodeDecadeSpike, Text: "One point was left out."})
		}
	case fit.Above:
		r.Why = "It draws 0.2 mA at the end of its sweep and never reaches 1 mA."
	case fit.Open:
		r.Why = "No current above the noise of the meter at any gate voltage."
	case fit.Shorted:
		r.Why = "More than 1 A flows with the gate at its off voltage."
	case fit.WrongWayRound:
		r.Why = "The current flows against the sign of the part."
	case fit.Declined:
		r.Why = "Only two points lie above the noise: too few to interpolate."
		r.Warnings = append(r.Warnings, fit.Warning{Code: fit.CodeFewPoints, Text: "Two usable points, three are needed."})
	}
	d.Result = r
	if state == fit.Excluded {
		d.Excluded, d.Device.Why = true, "dropped on the floor"
		d.Result.State = fit.Measured
	}
	true_ := true
	sw := report.Sweep{
		Sweep: record.Sweep{
			ID: fmt.Sprintf("0190aaaa-0000-7000-8002-%012d", i), Direction: record.Up, Position: i + 1, MeasuredAt: "2026-05-04T08:00:00.000Z",
			Condition: record.Condition{Circuit: record.Load, RL: record.Known(10), RLTol: record.Known(0.01), RLRating: record.Known(25), VDD: record.Known(28), Ammeter: "drain", Pulsed: "dc", Temp: record.Known(25), TempOf: "sink"},
			Instruments: []record.Instrument{
				{Role: "gate", Name: "invented handheld", Serial: "A-1", Coverage: "limit", Ranges: []record.RangeAccuracy{{Top: 6, Percent: 0.5, Counts: 2, Resolution: 0.001}}, Isolated: &true_, Calibrated: "2025-11-01", Due: "2026-11-01"},
				{Role: "current", Name: "invented handheld", Serial: "A-2", Coverage: "limit", Ranges: []record.RangeAccuracy{{Top: 0.6, Percent: 1, Counts: 3, Resolution: 1e-4}}, Calibrated: "2025-03-01", Due: "2026-03-01"},
			},
			Columns: []record.Column{{Quantity: record.VG, Values: c.Vg}, {Quantity: record.ID, Values: c.Id}},
			Lines:   []record.Lines{{Point: 0, Line: 2 + i*o.Points, Count: len(c.Vg)}},
		},
		SourceName: "lot2612.csv", Result: d.Result, Curve: c,
	}
	if o.Spots {
		sw.Direction = record.Spot
		sw.Condition = record.Condition{Circuit: record.Diode, SpotCurrent: record.Known(0.01)}
		sw.Instruments = nil
	}
	d.Sweeps = []report.Sweep{sw}
	return d
}

func sweep(o Options, state fit.State, vt, beta, sign float64, rng *rand.Rand) fit.Curve {
	if o.Spots {
		return fit.Curve{Vg: []float64{sign * math.Round(gateFor(0.01, vt, beta)*100) / 100}, Id: []float64{sign * 0.01}}
	}
	c := fit.Curve{}
	for k := range o.Points {
		vg := 2 + 2*float64(k)/float64(max(1, o.Points-1)) + 0.002*rng.NormFloat64()
		i := current(vg, vt, beta)
		switch state {
		case fit.Above:
			i = current(vg, 4.15, beta)
		case fit.Open:
			i = 0
		case fit.Shorted:
			i = 1.1 + 0.01*vg
		case fit.WrongWayRound:
			i = -0.4
		}
		i += 2e-6 + 1e-6*rng.NormFloat64() + 0.002*i*rng.NormFloat64()
		c.Vg = append(c.Vg, sign*math.Round(vg*1000)/1000)
		c.Id = append(c.Id, sign*math.Round(i*1e7)/1e7)
		if i > 1.2 {
			break
		}
	}
	return c
}

// spread fills in plain statistics of the measured devices.
func spread(s *report.Sheet) {
	sp := &s.Spread
	sp.SortedBy, sp.Populations, sp.Estimator = s.SortedBy, 1, "1.4826 × median absolute deviation"
	sp.Summary, sp.Limits = map[fit.Key]lot.Summary{}, map[fit.Key]lot.Limit{}
	above := 0
	for _, d := range s.Devices {
		if d.State() == fit.Above {
			above++
		}
	}
	for _, k := range fit.Keys {
		var x []float64
		for _, d := range s.Devices {
			if q := d.Result.At(k); q.Ok() && !d.Excluded {
				x = append(x, q.Value)
			}
		}
		if len(x) == 0 {
			continue
		}
		m := lot.Summary{N: len(x), Min: slices.Min(x), Max: slices.Max(x), SD: math.NaN(), RobustSD: math.NaN(), Median: median(x)}
		if k == fit.KeyVgsth || k == fit.KeyVgsIdle {
			m.Above = above
		}
		sum := 0.0
		for _, v := range x {
			sum += v
		}
		m.Mean = sum / float64(len(x))
		if len(x) > 1 {
			ss := 0.0
			dev := make([]float64, len(x))
			for i, v := range x {
				ss += (v - m.Mean) * (v - m.Mean)
				dev[i] = math.Abs(v - m.Median)
			}
			m.SD, m.RobustSD = math.Sqrt(ss/float64(len(x)-1)), 1.4826*median(dev)
		}
		sp.Summary[k] = m
		if len(x) >= 8 && (k == s.SortedBy || k == fit.KeyGmIdle) {
			sp.Limits[k] = lot.Limit{K: 5.1, Basis: "this lot", Low: m.Median - 5.1*m.RobustSD, High: m.Median + 5.1*m.RobustSD}
		}
	}
	if len(s.Devices) < 8 {
		sp.Warnings = append(sp.Warnings, fit.Warning{Code: fit.CodeNTooSmall, Text: "Fewer than 8 devices: no limits are drawn from the lot itself."})
	}
}

func median(x []float64) float64 {
	x = slices.Sorted(slices.Values(x))
	n := len(x)
	if n%2 == 1 {
		return x[n/2]
	}
	return (x[n/2-1] + x[n/2]) / 2
}

// sorting puts the devices in bins of 50 mV.
func sorting(s *report.Sheet, o Options) {
	const width = 0.05
	m, ok := s.Spread.Summary[s.SortedBy]
	if !ok {
		return
	}
	srt := &lot.Sorting{By: s.SortedBy, SmallestWidth: 4 * 0.0008}
	first := math.Floor(m.Min/width) * width
	for k := 0; first+float64(k)*width <= m.Max; k++ {
		srt.Bins = append(srt.Bins, lot.Bin{Name: letters(k), Low: first + float64(k)*width, High: first + float64(k+1)*width})
	}
	for _, d := range s.Devices {
		q := d.Result.At(s.SortedBy)
		if d.Excluded || !q.Ok() {
			srt.Unsorted = append(srt.Unsorted, lot.Unsorted{Name: d.Name, Why: d.Reason()})
			continue
		}
		k := min(int((q.Value-first)/width), len(srt.Bins)-1)
		p := lot.Placed{Name: d.Name, Value: q.Value, U: q.U}
		b := &srt.Bins[k]
		if q.Value-b.Low < 2*q.U && k > 0 {
			p.Maybe = srt.Bins[k-1].Name
		} else if b.High-q.Value < 2*q.U && k+1 < len(srt.Bins) {
			p.Maybe = srt.Bins[k+1].Name
		}
		b.Devices = append(b.Devices, p)
	}
	for i := range srt.Bins {
		slices.SortFunc(srt.Bins[i].Devices, func(a, b lot.Placed) int {
			switch {
			case a.Value < b.Value:
				return -1
			case a.Value > b.Value:
				return 1
			}
			return 0
		})
	}
	s.Sorting = srt
}

func letters(k int) string {
	if k < 26 {
		return string(rune('A' + k))
	}
	return letters(k/26-1) + letters(k%26)
}
