package rehearsal

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"
)

// The kinds of faults.
const (
	Unplug     = "unplug"      // the adapter is gone; back after For, at the same name
	Silence    = "silence"     // nothing is sent, nothing is heard
	Overload   = "overload"    // the display shows overload
	LostPrefix = "lost-prefix" // the value is shown Value times as large (0: 1000, as by a lost milli)
	Swapped    = "swapped"     // exchanges the lines of Role and With
	Stuck      = "stuck"       // the display shows the same again and again
	Garbage    = "garbage"     // random bytes between and inside a share Value (0: half) of the frames
	Refused    = "refused"     // a supply puts the next matching command into its error queue and does not do it
	Slow       = "slow"        // Value more seconds a conversion (0: four cycles), or to a command (0: 0.5)
	Hold       = "hold"        // the display is held, and says so where the format can
	Late       = "lag"         // frames come Value seconds later (0: 0.2)
	Clear      = "clear"       // ends the faults of Role; an unplugged adapter comes back
)

// Fault is something that goes wrong on order.
type Fault struct {
	Kind  string  `json:"kind"`
	Role  string  `json:"role"`            // of a meter, or the name of a line: "supply-gate"
	With  string  `json:"with,omitempty"`  // other role, of Swapped
	For   float64 `json:"for_s,omitempty"` // s of the lines; 0: until Clear
	Value float64 `json:"value,omitempty"`
	Match string  `json:"match,omitempty"` // beginning of the command, of Refused; "" whatever sets something
}

// Fault lets something go wrong from now on.
func (b *Bench) Fault(f Fault) error {
	i, c, err := b.find(f.Role)
	if err != nil {
		return err
	}
	if !(f.For >= 0) || !(f.Value >= 0) || math.IsInf(f.Value, 0) {
		return fmt.Errorf("%w: fault %s: for %g s, value %g, must be 0 or more", ErrConfig, f.Kind, f.For, f.Value)
	}
	until := math.Inf(1)
	if f.For > 0 {
		until = b.now + f.For
	}
	ofMeter := []string{Overload, LostPrefix, Stuck, Hold, Late}
	if c == nil && slices.Contains(ofMeter, f.Kind) {
		return fmt.Errorf("%w: fault %s is of meters, %s is a supply", ErrConfig, f.Kind, f.Role)
	}
	switch f.Kind {
	case Unplug:
		b.unplug[b.wire[i.line]] = until
	case Silence:
		i.silent = until
	case Overload:
		c.overload = until
	case LostPrefix:
		c.scaled, c.factor = until, cmp.Or(f.Value, 1000)
	case Swapped:
		other, _, err := b.find(f.With)
		if err != nil {
			return err
		}
		b.exchange(i.line, other.line)
		if f.For > 0 {
			b.swaps = append(b.swaps, swap{i.line, other.line, until})
		}
	case Stuck:
		c.stuck = until
	case Garbage:
		i.dirty, i.share = until, f.Value
	case Refused:
		if i.supply == nil {
			return fmt.Errorf("%w: fault %s is of supplies, %s is a meter", ErrConfig, f.Kind, f.Role)
		}
		i.supply.refuse = &refusal{match: strings.ToUpper(f.Match), until: until}
	case Slow:
		i.slow, i.slowBy = until, f.Value
	case Hold:
		c.hold = until
	case Late:
		i.late, i.lateBy = until, f.Value
	case Clear:
		b.clear(i)
	default:
		return fmt.Errorf("%w: no fault %q", ErrConfig, f.Kind)
	}
	return nil
}

// clear ends all faults of an instrument.
func (b *Bench) clear(i *instrument) {
	delete(b.unplug, b.wire[i.line])
	i.silent, i.slow, i.late, i.dirty = 0, 0, 0, 0
	for _, c := range i.channels {
		c.overload, c.stuck, c.hold, c.scaled = 0, 0, 0, 0
	}
	if i.supply != nil {
		i.supply.refuse = nil
	}
	b.swaps = slices.DeleteFunc(b.swaps, func(s swap) bool { return s.a == i.line || s.b == i.line })
	if other := b.wire[i.line]; other != i.line {
		for line, plugged := range b.wire {
			if plugged == i.line {
				b.wire[line] = other
			}
		}
		b.wire[i.line] = i.line
	}
}
