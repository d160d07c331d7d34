package bench

import (
	"fmt"
	"regexp"
	"slices"
	"strings"

	"gatesill/store/record"
)

// Cautions are sentences about the bench that a person must have read before
// power is switched on: inputs tied to the computer's ground in a place that is
// not at ground, a load resistor loaded beyond its rating, a supply above the
// bench's own limits. What the file leaves open is taken for the worse.
func (b *Bench) Cautions() []string {
	var out []string
	say := func(format string, args ...any) { out = append(out, fmt.Sprintf(format, args...)) }
	for i, m := range b.Meters {
		where := b.offGround(m.Role)
		if where == "" || m.Isolated != nil && *m.Isolated {
			continue
		}
		what := "an input tied to the computer's ground"
		if m.Isolated == nil {
			what = "it is not said to be isolated; an input tied to the computer's ground"
		}
		say("the %s sits %s: %s shorts there (state isolated = true only when that is sure)", b.meterWords(i), where, what)
	}
	for _, s := range b.Supplies {
		if s.Swapped && (s.Isolated == nil || !*s.Isolated) {
			say("the leads of the %s supply%s are swapped and it is not said to be isolated: a minus pole tied to ground shorts it through the source", s.Drives, named(s.Name))
		}
	}
	for _, path := range b.paths() {
		if passing.MatchString(path) {
			say("%s is a passing name: after a restart it may be another meter's; gatesill meters shows the lasting ones", path)
		}
	}
	c := b.Given
	vdd, hasVDD := c.VDD.Get()
	if rl, ok := c.RL.Get(); ok && hasVDD && c.Circuit != record.Fixed {
		most := vdd * vdd / rl
		if rating, ok := c.RLRating.Get(); ok && most > rating {
			say("a device that is fully on puts %.3g W into the load resistor, which is rated %.3g W", most, rating)
		}
		if pd, ok := b.Limits.PD.Get(); ok && most/4 > pd {
			say("at half the supply voltage the device takes %.3g W, above the bench's limit of %.3g W: the limit alone protects it", most/4, pd)
		}
	}
	if most, ok := b.Limits.Vds.Get(); ok && hasVDD && abs(vdd) > most {
		say("the supply of %.3g V is above the bench's limit for V_DS of %.3g V", abs(vdd), most)
	}
	for _, s := range b.Supplies {
		v, ok := s.Voltage.Get()
		if most, limited := b.Limits.Vds.Get(); ok && limited && abs(v) > most {
			say("the drain supply%s gives %.3g V, above the bench's limit for V_DS of %.3g V", named(s.Name), abs(v), most)
		}
		if ok && hasVDD && c.Circuit != record.Fixed && v != vdd {
			say("the drain supply%s gives %.3g V when it is on, but the circuit says vdd = %.3g V", named(s.Name), v, vdd)
		}
	}
	return out
}

// passing are names that the system hands out in the order of appearance.
var passing = regexp.MustCompile(`^/dev/(tty(USB|ACM)\d+|usbtmc\d+)$`)

// paths are the lines of the bench, each once.
func (b *Bench) paths() []string {
	var out []string
	for _, l := range b.Lines {
		out = append(out, l.Path)
	}
	for _, s := range b.Supplies {
		out = append(out, s.Path)
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// offGround tells where a meter sits when neither of its leads is at the source
// of a grounded device, "" when one is.
func (b *Bench) offGround(role string) string {
	atSource := b.Given.Ammeter == "source"
	switch {
	case role == "load":
		return "across the load resistor, above ground on both leads"
	case role == "current" && !atSource:
		return "in the drain lead"
	case (role == "drain" || role == "gate" && b.Given.GateReturn != "ground") && atSource:
		return "at the source, above ground by the burden of the ammeter"
	}
	return ""
}

// Against tells which limits of the bench lie above what a part stands. A limit
// that only the part states holds on the bench too.
func (b *Bench) Against(p record.Part) []string {
	var out []string
	for _, l := range []struct {
		name, unit string
		bench      record.Num
		part       record.Num
	}{
		{"V_GS", "V", b.Limits.Vgs, p.MaxVgs}, {"V_DS", "V", b.Limits.Vds, p.MaxVds}, {"I_D", "A", b.Limits.ID, p.MaxID},
		{"P_D", "W", b.Limits.PD, p.MaxPD}, {"temperature", "degC", b.Limits.Temp, p.MaxTemp},
	} {
		x, ok := l.bench.Get()
		if most, known := l.part.Get(); ok && known && x > most {
			out = append(out, fmt.Sprintf("the bench's limit for %s of %s is above the %s that %s stands", l.name, withUnit(x, l.unit), withUnit(most, l.unit), p.Name))
		}
	}
	return out
}

// Live complains when the bench cannot be listened to: no meter has a line, or
// one with a line does not say how it speaks. The text begins with the place.
func (b *Bench) Live() error {
	n := 0
	for i, l := range b.Lines {
		key := fmt.Sprintf("meter[%d]", i)
		p := parser{bench: b, file: &file{Meter: make([]meterKeys, len(b.Meters))}}
		for j, m := range b.Meters {
			p.file.Meter[j].Role = m.Role
		}
		switch {
		case l.Path == "" && l.Speaks != "":
			p.fail(key+".line", "missing: %s comes in on no line", l.Speaks)
		case l.Path != "" && l.Speaks == "":
			p.fail(key+".speaks", "missing: how does it speak? known are %s", strings.Join(formatNames(), ", "))
		case l.Path == Keyboard && l.Speaks != "text":
			p.fail(key+".speaks", "%q, but what is typed is text", l.Speaks)
		case l.Path != "":
			n++
		}
		if err := p.first(); err != nil {
			return err
		}
	}
	if n == 0 {
		return fmt.Errorf("1: column 1: no meter has a line: live readings need line and speaks")
	}
	return nil
}

// meterWords names a meter for people.
func (b *Bench) meterWords(i int) string {
	return b.Meters[i].Role + " meter" + named(b.Meters[i].Name)
}

func named(name string) string {
	if name == "" {
		return ""
	}
	return fmt.Sprintf(" %q", name)
}

func abs(x float64) float64 { return max(x, -x) }
