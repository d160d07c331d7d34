package lot

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gatesill/fit/stats"
)

// Origin is how the two groups of a [Split] lie to something written on the
// devices, their date codes or the tubes they came in.
type Origin struct {
	Of      string // "date code" or "tube"
	Groups  []OriginGroup
	P       float64 // probability of so good an agreement by chance; NaN: too few to tell
	Follows bool    // P is small enough to say so
	Text    string  // the sentence that goes with Follows; "" without
}

// OriginGroup counts the devices of one date code or tube in the two groups.
type OriginGroup struct {
	Name      string // "": not given, and in no test
	Low, High int
}

// originLevel is the probability with which date code or tube, together, are said
// to be followed where they are not.
const originLevel = 0.01

// originsOf looks whether the groups follow date code or tube, as far as at least
// two of one kind are known.
func originsOf(devs []Device, low, high []bool) []Origin {
	var out []Origin
	for _, kind := range []struct {
		of   string
		name func(*Device) string
	}{
		{"date code", func(d *Device) string { return d.DateCode }},
		{"tube", func(d *Device) string { return d.Tube }},
	} {
		o := Origin{Of: kind.of}
		known := 0
		for i := range devs {
			if !low[i] && !high[i] {
				continue
			}
			name := kind.name(&devs[i])
			at := slices.IndexFunc(o.Groups, func(g OriginGroup) bool { return g.Name == name })
			if at < 0 {
				at = len(o.Groups)
				o.Groups = append(o.Groups, OriginGroup{Name: name})
				if name != "" {
					known++
				}
			}
			if low[i] {
				o.Groups[at].Low++
			} else {
				o.Groups[at].High++
			}
		}
		if known < 2 {
			continue
		}
		slices.SortFunc(o.Groups, func(a, b OriginGroup) int {
			if (a.Name == "") != (b.Name == "") {
				return strings.Compare(b.Name, a.Name) // what is not given last
			}
			return strings.Compare(a.Name, b.Name)
		})
		out = append(out, o)
	}
	for i := range out {
		out[i].judge(originLevel / float64(len(out)))
	}
	return out
}

func (o *Origin) judge(level float64) {
	var low, high []int
	var parts []string
	for _, g := range o.Groups {
		if g.Name == "" {
			continue
		}
		low, high = append(low, g.Low), append(high, g.High)
		parts = append(parts, fmt.Sprintf("%s has %d in the lower and %d in the upper group", g.Name, g.Low, g.High))
	}
	o.P = stats.LabelAgreement(low, high)
	if o.Follows = o.P < level; !o.Follows {
		return
	}
	const most = 4
	if n := len(parts); n > most {
		parts = append(parts[:most-1], fmt.Sprintf("and so on for %d more", n-most+1))
	}
	o.Text = fmt.Sprintf("the groups follow the %s: %s (by chance so good an agreement has p = %s)", o.Of, strings.Join(parts, ", "), short(math.Max(o.P, 1e-12)))
}
