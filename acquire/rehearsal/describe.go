package rehearsal

import (
	"cmp"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// BenchName is the name of every bench that does not exist, by which what it said can
// be told from what was measured.
const BenchName = "rehearsal (invented)"

// Describe gives a bench file that describes the bench as a person would who knows
// its data sheets: not its faults, its noise sources or its unknown lags. path gives
// the address of a line.
func (b *Bench) Describe(path func(line string) string) (string, error) {
	c := &b.c
	var t strings.Builder
	put := func(key, format string, v ...any) { fmt.Fprintf(&t, "%s = %s\n", key, fmt.Sprintf(format, v...)) }
	known := func(key string, x float64, unit string) {
		if x != 0 {
			put(key, "%q", quantity(x, unit))
		}
	}
	put("name", "%q", BenchName)
	t.WriteString("\n[circuit]\n")
	put("kind", "%q", c.Circuit)
	if c.Circuit != "fixed" {
		known("rl", c.RL, "ohm")
		put("rl_tol", "%q", "1 %")
		known("rl_rating", c.Rating, "W")
		known("vdd", c.VDD, "V")
	} else {
		known("vds", c.VDD, "V")
	}
	put("ammeter", "%q", "drain")
	put("gate_return", "%q", "source")
	put("current", "%q", "dc")
	known("bleed", c.Bleed, "ohm")
	if c.MaxVgs+c.MaxVds+c.MaxID+c.MaxPD > 0 {
		t.WriteString("\n[limits]\n")
		known("vgs", c.MaxVgs, "V")
		known("vds", c.MaxVds, "V")
		known("id", c.MaxID, "A")
		known("pd", c.MaxPD, "W")
	}
	for _, i := range b.list {
		for k, ch := range i.channels {
			unit := units[ch.Role]
			t.WriteString("\n[[meter]]\n")
			put("role", "%q", ch.Role)
			put("name", "%q", "simulated "+ch.Role+" meter")
			put("line", "%q", path(i.line))
			put("speaks", "%q", i.channels[0].Speaks)
			if s := cmp.Or(i.channels[0].Settings, i.format.settings); s != "" {
				put("settings", "%q", s)
			}
			if len(i.channels) > 1 {
				put("column", "%d", k+1)
				put("unit", "%q", unit)
			}
			first := i.channels[0]
			integration, cycle := first.conversion()
			if i.format.scpi {
				put("setup", "[%q, %q]", "*CLS", configuration(ch.Meter))
				put("ask", "%q", "READ?")
			} else if i.format.ask != "" {
				put("ask", "%q", i.format.ask)
			}
			if i.format.scpi || i.format.ask != "" {
				known("every", cycle, "s")
			}
			if first.Integration > 0 {
				known("integration", integration, "s")
			}
			known("processing", first.Processing, "s")
			known("lag_u", first.LagU, "s")
			put("isolated", "true")
			for _, top := range ch.Tops {
				digit := top / ch.Counts
				t.WriteString("\n  [[meter.range]]\n")
				put("  top", "%q", quantity(top, unit))
				put("  percent", "%s", plain(ch.Percent))
				put("  counts", "%s", plain(ch.Plus))
				put("  resolution", "%q", quantity(digit, unit))
				known("  noise", ch.Noise*digit, unit)
				known("  burden", ch.Burden, "ohm")
			}
		}
		if s := i.supply; s != nil {
			t.WriteString("\n[[supply]]\n")
			put("drives", "%q", s.drives)
			put("name", "%q", "simulated "+s.drives+" supply")
			put("line", "%q", path(i.line))
			put("settings", "%q", "115200 8N1")
			if s.drives == "gate" {
				put("current_limit", "%q", "20 mA")
			} else {
				put("current_limit", "%q", quantity(cmp.Or(c.MaxID, 1), "A"))
				put("voltage", "%q", quantity(c.VDD, "V"))
			}
			put("isolated", "true")
		}
	}
	return t.String(), nil
}

// configuration is the command that lets an SCPI meter measure what it is for.
func configuration(m Meter) string {
	kind := "VOLT"
	if m.Role == "current" {
		kind = "CURR"
	}
	if m.Auto {
		return "CONF:" + kind + ":DC"
	}
	return "CONF:" + kind + ":DC " + plain(m.Tops[len(m.Tops)-1])
}

func plain(x float64) string { return strconv.FormatFloat(x, 'g', 12, 64) }

// quantity writes a number with its unit and a prefix that suits it.
func quantity(x float64, unit string) string {
	if unit == "degC" {
		return plain(x) + " " + unit
	}
	scale, prefix := 1.0, ""
	for _, p := range []struct {
		scale  float64
		prefix string
	}{{1e6, "M"}, {1e3, "k"}, {1, ""}, {1e-3, "m"}, {1e-6, "u"}, {1e-9, "n"}} {
		scale, prefix = p.scale, p.prefix
		if math.Abs(x) >= p.scale*(1-1e-9) {
			break
		}
	}
	return plain(x/scale) + " " + prefix + unit
}
