package bias

import (
	"math"
	"slices"

	"gatesill/fit/stats"
)

// Where a temperature coefficient comes from.
const (
	TempcoGiven    = "given"
	TempcoMeasured = "measured"
)

// Tempco is the change of the gate voltage at the idle current with temperature.
type Tempco struct {
	Value    float64 // V/K; NaN: none given or measured
	Basis    string  // TempcoGiven, TempcoMeasured; "": none
	N        int     // devices measured at two temperatures or more
	From, To float64 // °C, of those
	Low      float64 // V/K, least and greatest of the devices
	High     float64
}

// NoTempco is what is known where nothing is.
func NoTempco() Tempco {
	n := math.NaN()
	return Tempco{Value: n, From: n, To: n, Low: n, High: n}
}

// TempPoint is the gate voltage of one device at the idle current in one sweep.
type TempPoint struct {
	Temp float64 // °C
	Gate float64 // V
}

// leastWarming is by how much temperatures have to differ for a coefficient: below it the
// readings' own errors count for more (judgement).
const leastWarming = 5 // K

// TempcoOf takes the coefficient from devices measured at several temperatures: the
// median over the devices of the slope of a straight line through their points. Devices
// whose temperatures differ by less than 5 K have no say. Checked: TestTempcoOf.
func TempcoOf(devices [][]TempPoint) Tempco {
	t := NoTempco()
	var slopes []float64
	from, to := math.Inf(1), math.Inf(-1)
	for _, list := range devices {
		var x, y []float64
		for _, q := range list {
			if isNumber(q.Temp) && isNumber(q.Gate) {
				x, y = append(x, q.Temp), append(y, q.Gate)
			}
		}
		if len(x) < 2 || slices.Max(x)-slices.Min(x) < leastWarming {
			continue
		}
		mx, _ := stats.MeanSD(x)
		my, _ := stats.MeanSD(y)
		num, den := 0.0, 0.0
		for i := range x {
			num += (x[i] - mx) * (y[i] - my)
			den += (x[i] - mx) * (x[i] - mx)
		}
		slopes = append(slopes, num/den)
		from, to = math.Min(from, slices.Min(x)), math.Max(to, slices.Max(x))
	}
	if len(slopes) == 0 {
		return t
	}
	t.Value, t.Basis, t.N, t.From, t.To = stats.Median(slopes), TempcoMeasured, len(slopes), from, to
	t.Low, t.High = slices.Min(slopes), slices.Max(slopes)
	return t
}

// Typical slope of the threshold and exponent of the gain factor with temperature,
// with what they range over (common practice, no source).
const (
	usualKappa = 4e-3 // V/K
	leastKappa = 3e-3
	mostKappa  = 8e-3
	usualAlpha = 1.7
	leastAlpha = 1.5
	mostAlpha  = 2.5
)

const absoluteZero = -273.15 // °C

// Thermal is how the bias follows temperature.
type Thermal struct {
	Tempco
	Temp    float64 // °C, at which it holds; 25 where the lot's was not known
	Assumed bool    // it was not known
	// Of a usual part at this overdrive, only to be shown.
	Typical, TypicalLow, TypicalHigh float64 // V/K; NaN: the overdrive is not known
	Overdrive                        float64 // V, median at the idle current
	GainFrom                         int     // devices behind it
	// The point at which the current does not change with temperature, from the
	// coefficient if there is one and a usual α, else from a usual part.
	ZeroGate, ZeroCurrent float64 // V and A, median device; NaN: not known
	Rises                 bool    // the idle current lies below that point: at a constant gate voltage it rises with heat
	Rate                  float64 // 1/K, relative change of the idle current at constant gate voltage; NaN without a coefficient
}

// thermalOf says how the bias of a lot follows temperature.
//
// With V_T falling by κ per kelvin and β following T^-α the gate voltage at a constant
// current moves by
//
//	dV_GS/dT = -κ + αv/(2T)
//
// at overdrive v, and it is 0, with the current constant at a constant gate voltage, at
//
//	v = 2κT/α.
//
// A coefficient s that is known gives κ = αv/(2T) - s and takes the place of κ. Square law, in
// saturation; T absolute. Source: I. M. Filanovsky and A. Allam, "Mutual compensation of
// mobility and threshold voltage temperature effects with applications in CMOS
// circuits" (IEEE Transactions on Circuits and Systems I 48, 2001; abstract), the formula derived
// anew. Checked: TestZeroPoint, against the crossing of two curves.
func thermalOf(p *Plan) Thermal {
	nan := math.NaN()
	t := Thermal{Tempco: p.Tempco, Temp: p.Temp, Typical: nan, TypicalLow: nan, TypicalHigh: nan, Overdrive: nan, ZeroGate: nan, ZeroCurrent: nan, Rate: nan}
	if t.Basis == "" {
		t.Tempco = NoTempco()
	}
	if !isNumber(t.Temp) {
		t.Temp, t.Assumed = 25, true
	}
	var vs, betas, thetas []float64
	for _, u := range p.counted() {
		if v, b, th := u.result.Overdrive(p.Idle, p.Beta); !math.IsNaN(v) {
			vs, betas, thetas = append(vs, v), append(betas, b), append(thetas, th)
		}
	}
	if len(vs) == 0 {
		return t
	}
	sign := 1.0
	if p.pchannel {
		sign = -1
	}
	t.Overdrive, t.GainFrom = stats.Median(vs), len(vs)
	beta, theta, v := stats.Median(betas), stats.Median(thetas), t.Overdrive
	abs := t.Temp - absoluteZero
	slope := func(kappa, alpha float64) float64 { return sign * (-kappa + alpha*v/(2*abs)) }
	t.Typical = slope(usualKappa, usualAlpha)
	t.TypicalLow, t.TypicalHigh = slope(mostKappa, leastAlpha), slope(leastKappa, mostAlpha)
	if sign < 0 {
		t.TypicalLow, t.TypicalHigh = t.TypicalHigh, t.TypicalLow
	}
	kappa := usualKappa
	if t.Basis != "" {
		kappa = usualAlpha*v/(2*abs) - sign*t.Value
		t.Rate = -sign * t.Value * conductance(v, beta, theta) / p.Idle
	}
	if zero := 2 * kappa * abs / usualAlpha; zero > 0 {
		t.ZeroGate = p.Centre + sign*(zero-v)
		t.ZeroCurrent = beta * zero * zero / (2 * (1 + theta*zero))
		t.Rises = v < zero
	}
	return t
}

// conductance is the transconductance of the law with mobility degradation, S:
// βv(2+θv)/(2(1+θv)²).
func conductance(v, beta, theta float64) float64 {
	return beta * v * (2 + theta*v) / (2 * (1 + theta*v) * (1 + theta*v))
}
