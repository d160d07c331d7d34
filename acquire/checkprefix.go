package acquire

import (
	"fmt"
	"math"

	"gatesill/store/record"
)

// PrefixVerdict is how a current agrees with the voltage across the load resistor.
type PrefixVerdict struct {
	Ratio  float64 // current meter to load resistor; NaN: nothing to compare
	Refuse bool    // a prefix is lost: nothing must be stored
	Factor float64 // what the readings must be multiplied with, when Refuse
	Key    string  // what the one key puts right: "this channel is mA"
	Text   string  // for people; "" all is well
}

// PrefixCheck compares the current meter with the load resistor: V_L / R_L, or
// (V_DD - V_D) / R_L. Three decades between them mean that a prefix got lost, which it refuses and can
// put right; a few percent are R_L itself, its leads or a burden, which it only
// says. It compares where both are well above their last digit.
type PrefixCheck struct {
	circuit record.Condition
	scale   map[string]float64
}

// NewPrefixCheck makes a check for a circuit; without a load resistor it never
// says anything.
func NewPrefixCheck(c record.Condition) *PrefixCheck {
	return &PrefixCheck{circuit: c, scale: map[string]float64{}}
}

// SetScale makes the readings of a role count by a factor.
func (c *PrefixCheck) SetScale(role string, factor float64) {
	if factor > 0 && factor != 1 {
		c.scale[role] = factor
	} else {
		delete(c.scale, role)
	}
}

// Apply gives the reading as it counts: value and digit by the factor of its role.
func (c *PrefixCheck) Apply(r record.Reading) record.Reading {
	f, ok := c.scale[r.Role]
	if !ok {
		return r
	}
	r.Value, r.Digit = record.Known(r.Value.Float()*f), record.Known(r.Digit.Float()*f)
	return r
}

// Fix puts a refused verdict right from now on, and gives the factor that the
// readings of the current meter count by, those of earlier fixes in it.
func (c *PrefixCheck) Fix(v PrefixVerdict) float64 {
	f := c.scale[Current]
	if f == 0 {
		f = 1
	}
	if v.Refuse {
		f *= v.Factor
	}
	c.SetScale(Current, f)
	return f
}

// leastLoad is the voltage across the load resistor from which it tells the current, V.
const leastLoad = 0.02

// prefixes that meters lose, with what their channel then is.
var prefixes = []struct {
	ratio  float64
	factor float64
	key    string
}{
	{1e3, 1e-3, "this channel is mA"},
	{1e6, 1e-6, "this channel is µA"},
	{1e-3, 1e3, "this channel is A, not mA"},
	{1e-6, 1e6, "this channel is A, not µA"},
}

// Look compares the columns of a point. digit is one count of the current meter,
// A, NaN where it is not known.
func (c *PrefixCheck) Look(p Point, digit float64) PrefixVerdict {
	none := PrefixVerdict{Ratio: math.NaN()}
	rl := c.circuit.RL.Float()
	if !(rl > 0) || c.circuit.Circuit == record.Fixed || math.IsNaN(p.Id) {
		return none
	}
	vdd, read := math.Abs(p.Vdd), true
	if math.IsNaN(vdd) {
		vdd, read = math.Abs(c.circuit.VDD.Float()), false
	}
	var ref float64 // A
	how := "V_L/R_L"
	vd := math.Abs(p.Vd)
	if c.circuit.Circuit == record.Diode {
		vd = math.Abs(p.Vg)
	}
	switch {
	case !math.IsNaN(p.Vl):
		if math.Abs(p.Vl) < leastLoad {
			return c.claims(p, rl)
		}
		ref = math.Abs(p.Vl) / rl
	case !math.IsNaN(vd) && !math.IsNaN(vdd):
		least := 0.03 * vdd // below, the difference is mostly the meters' own error
		if !read {
			least = 0.1 * vdd
		}
		if vdd-vd < least {
			return none
		}
		ref, how = (vdd-vd)/rl, "(V_DD - V_D)/R_L"
	default:
		return none
	}
	id := math.Abs(p.Id)
	v := PrefixVerdict{Ratio: id / ref}
	for _, x := range prefixes {
		// Within a factor of two: the readings need not belong to one instant.
		if q := v.Ratio / x.ratio; q > 0.5 && q < 2 {
			v.Refuse, v.Factor, v.Key = true, x.factor, x.key
			v.Text = fmt.Sprintf("the current meter says %s, the load resistor %s (%s): a prefix is lost; nothing is stored; one key puts it right: %s",
				show(p.Id, "A"), show(ref, "A"), how, x.key)
			return v
		}
	}
	switch off := math.Abs(v.Ratio - 1); {
	case off <= 0.02 || digit > 0 && math.Abs(id-ref) <= 2*digit:
	case off <= 0.25:
		v.Text = fmt.Sprintf("the current meter and %s differ by %+.1f %%: R_L, its heating, a lead, or the meter's burden", how, 100*(v.Ratio-1))
	default:
		v.Text = fmt.Sprintf("the current meter says %s, %s says %s: is R_L %s, and is each meter where the bench file says?",
			show(p.Id, "A"), how, show(ref, "A"), ohms(rl))
	}
	return v
}

// claims judges a current where the load resistor has too little voltage to tell it,
// but could not have so little if the current were what its meter says.
func (c *PrefixCheck) claims(p Point, rl float64) PrefixVerdict {
	id, vl := math.Abs(p.Id), math.Abs(p.Vl)
	v := PrefixVerdict{Ratio: math.NaN()}
	if !(id*rl > 5*leastLoad) {
		return v
	}
	for _, x := range prefixes {
		if would := id * x.factor * rl; x.ratio > 1 && id*x.factor > 1e-5 && math.Abs(would-vl) < 1e-3+0.3*vl {
			v.Ratio, v.Refuse, v.Factor, v.Key = x.ratio, true, x.factor, x.key
			v.Text = fmt.Sprintf("the current meter says %s, which would put %s across the load resistor, and there is %s: a prefix is lost; nothing is stored; one key puts it right: %s",
				show(p.Id, "A"), show(id*rl, "V"), show(vl, "V"), x.key)
			return v
		}
	}
	v.Text = fmt.Sprintf("the current meter says %s, which would put %s across the load resistor, and there is %s: is the load meter's lead on, and each meter where the bench file says?",
		show(p.Id, "A"), show(id*rl, "V"), show(vl, "V"))
	return v
}

func ohms(x float64) string {
	if x >= 1000 {
		return fmt.Sprintf("%.4g kΩ", x/1000)
	}
	return fmt.Sprintf("%.4g Ω", x)
}
