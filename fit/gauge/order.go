package gauge

import (
	"cmp"
	"fmt"
	"slices"
)

// orderOf looks whether the devices were measured in an order that changed from
// round to round. A fixed order makes a bench that drifts look like a difference
// of parts, or like repeatability.
//
// Round k of a sitting is the k-th insertion of each device. Not random: every
// device again right after itself, or all rounds in one order, or in that order
// backwards. Three devices have six orders, so that two like rounds of fewer than
// four say nothing.
func orderOf(ms []Measuring) Order {
	bySitting := map[string][]Measuring{}
	var sittings []string
	for _, m := range ms {
		if _, ok := bySitting[m.Sitting]; !ok {
			sittings = append(sittings, m.Sitting)
		}
		bySitting[m.Sitting] = append(bySitting[m.Sitting], m)
	}
	out := Order{Random: true}
	for _, s := range sittings {
		list := bySitting[s]
		slices.SortStableFunc(list, func(a, b Measuring) int { return cmp.Compare(a.Place, b.Place) })
		known, text := orderIn(list)
		if !known {
			continue
		}
		out.Known = true
		if text != "" && out.Random {
			out.Random, out.Sitting, out.Text = false, s, text
		}
	}
	if out.Known && out.Random {
		out.Text = "the order changed from round to round"
	}
	return out
}

// orderIn looks at one sitting; text is why it was not random.
func orderIn(list []Measuring) (known bool, text string) {
	var rounds [][]string
	seen := map[string]int{}
	right, again := 0, 0
	for i, m := range list {
		k := seen[m.Device]
		seen[m.Device]++
		if k > 0 {
			again++
			if list[i-1].Device == m.Device {
				right++
			}
		}
		for len(rounds) <= k {
			rounds = append(rounds, nil)
		}
		rounds[k] = append(rounds[k], m.Device)
	}
	if len(rounds) < 2 || len(rounds[1]) < 4 {
		return false, ""
	}
	if right == again {
		return true, "not random: every device was measured again right after itself, so that a drift does not show and whether it was taken out in between cannot be seen"
	}
	// Only devices of the last round are in all of them.
	last := rounds[len(rounds)-1]
	if len(last) < 4 {
		last = rounds[1]
		rounds = rounds[:2]
	}
	same, backwards := true, false
	for k, r := range rounds {
		r = slices.DeleteFunc(slices.Clone(r), func(d string) bool { return !slices.Contains(last, d) })
		rounds[k] = r
		if k == 0 {
			continue
		}
		turned := slices.Clone(r)
		slices.Reverse(turned)
		switch {
		case slices.Equal(r, rounds[0]):
		case slices.Equal(turned, rounds[0]):
			backwards = true
		default:
			same = false
		}
	}
	if !same {
		return true, ""
	}
	how := "in the same order"
	if backwards {
		how = "in one order forwards and backwards"
	}
	return true, fmt.Sprintf("not random: all %d rounds were measured %s, so that a drift of the bench looks like a difference of parts or like repeatability", len(rounds), how)
}
