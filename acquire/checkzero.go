package acquire

import (
	"fmt"
	"math"

	"gatesill/store/record"
)

// Zero is what one meter shows while nothing is there to be shown.
type Zero struct {
	Role   string
	N      int     // numbers it rests on
	Offset float64 // mean, SI unit
	Noise  float64 // standard deviation, SI unit; NaN below two numbers
	Digit  float64 // one count, SI unit; NaN not known
	Large  bool    // more than 3 counts, or more than 0.5 % of the range
	Text   string  // for people; "" when it is small
}

// Zeros takes every meter's offset while no part is inserted, the gate is at 0 V
// and the drain supply is off. It only says what it finds; nothing is subtracted.
type Zeros struct {
	roles []string
	n     int
	tops  map[string]float64 // greatest reading of the range, SI unit
	got   map[string][]float64
	digit map[string]float64
	over  map[string]string
}

// NewZeros takes n readings (at least 2; 5 is enough) of each role but the
// temperature. tops gives the top of the range each meter stands in, SI unit, where
// it is known.
func NewZeros(roles []string, n int, tops map[string]float64) *Zeros {
	z := &Zeros{n: max(n, 2), tops: tops, got: map[string][]float64{}, digit: map[string]float64{}, over: map[string]string{}}
	for _, r := range roles {
		if r != Temperature {
			z.roles = append(z.roles, r)
		}
	}
	return z
}

// Instruction says what the operator does.
func (z *Zeros) Instruction() string {
	return "nothing inserted, gate at 0 V, drain supply off: zeros are taken"
}

// Event takes what happened on a line; only readings count.
func (z *Zeros) Event(e Event) {
	for _, r := range e.Readings {
		x, known := r.Value.Get()
		switch {
		case r.Refused != "":
			z.over[r.Role] = r.Refused
		case r.State != "":
			z.over[r.Role] = string(r.State)
		case known:
			delete(z.over, r.Role)
			if len(z.got[r.Role]) < z.n {
				z.got[r.Role] = append(z.got[r.Role], x)
			}
			if d, ok := r.Digit.Get(); ok {
				z.digit[r.Role] = d
			}
		}
	}
}

// Missing lists the roles that have not given their readings yet, with what they
// say instead.
func (z *Zeros) Missing() []string {
	var out []string
	for _, r := range z.roles {
		if have := len(z.got[r]); have < z.n {
			text := fmt.Sprintf("%s meter: %d of %d readings", r, have, z.n)
			if why := z.over[r]; why != "" {
				text += ", it says: " + why
			}
			out = append(out, text)
		}
	}
	return out
}

// Result gives the zeros, in the order of the roles.
func (z *Zeros) Result() []Zero {
	var out []Zero
	for _, r := range z.roles {
		o := Zero{Role: r, N: len(z.got[r]), Offset: math.NaN(), Noise: math.NaN(), Digit: math.NaN()}
		if d := z.digit[r]; d > 0 {
			o.Digit = d
		}
		if o.N == 0 {
			o.Text = "the " + r + " meter gave no number"
			out = append(out, o)
			continue
		}
		sum := 0.0
		for _, x := range z.got[r] {
			sum += x
		}
		o.Offset = sum / float64(o.N)
		if o.N > 1 {
			ss := 0.0
			for _, x := range z.got[r] {
				ss += (x - o.Offset) * (x - o.Offset)
			}
			o.Noise = math.Sqrt(ss / float64(o.N-1))
		}
		z.judge(&o)
		out = append(out, o)
	}
	return out
}

func (z *Zeros) judge(o *Zero) {
	unit := "V"
	if o.Role == Current {
		unit = "A"
	}
	a := math.Abs(o.Offset)
	const grace = 1 + 1e-9 // three counts exactly are not more than three counts
	counts, share := a > 3*o.Digit*grace, z.tops[o.Role] > 0 && a > 0.005*z.tops[o.Role]*grace
	if o.Large = counts || share; !o.Large {
		return
	}
	o.Text = fmt.Sprintf("the %s meter shows %s with nothing there", o.Role, show(o.Offset, unit))
	if counts {
		o.Text += fmt.Sprintf(", %.1f counts", a/o.Digit)
	}
	if share {
		o.Text += fmt.Sprintf(", %.1f %% of its range", 100*a/z.tops[o.Role])
	}
	if share {
		o.Text += ": is the supply off, the gate at 0 V, the lead in the right jack, the meter on the right function?"
	} else {
		o.Text += ": let it warm up, short its leads, set its zero"
	}
}

// number gives a reading's number, whatever role it was meant for.
func number(r record.Reading) (float64, bool) {
	x, ok := r.Value.Get()
	return x, ok && r.State == ""
}
