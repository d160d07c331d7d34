package job

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"time"

	"gatesill/acquire/rehearsal"
)

// Fault is something that is to go wrong on a simulated bench.
type Fault struct {
	rehearsal.Fault
	Start bool    // before the checks; else At counts
	At    float64 // s after the first sweep has begun; of meters, after listening has
}

// FaultKind says what a kind of fault is.
type FaultKind struct{ Kind, Text string }

// FaultKinds lists what can be put on a simulated bench.
func FaultKinds() []FaultKind {
	return []FaultKind{
		{rehearsal.Unplug, "the adapter is pulled out; +SECONDS later it is plugged in again"},
		{rehearsal.Silence, "the meter or supply says nothing more"},
		{rehearsal.Stuck, "the display shows the same digits again and again"},
		{rehearsal.Hold, "the display is held, and says so where its format can"},
		{rehearsal.Overload, "the display shows overload"},
		{rehearsal.LostPrefix, "the value is a thousand times too great: mA shown as A"},
		{rehearsal.Swapped, "two lines are exchanged: swapped:gate,current"},
		{rehearsal.Garbage, "random bytes on the line"},
		{rehearsal.Slow, "it takes its time"},
		{rehearsal.Late, "what it says comes later"},
		{rehearsal.Refused, "the supply refuses the next command that sets something"},
	}
}

// ParseFault reads KIND:ROLE[,ROLE][@SECONDS][+SECONDS]; "@start" is before the
// checks. Without @ it is the moment at which the first sweep begins, without + it
// lasts.
func ParseFault(text string) (Fault, error) {
	f := Fault{}
	var kinds []string
	for _, k := range FaultKinds() {
		kinds = append(kinds, k.Kind)
	}
	bad := func(format string, args ...any) (Fault, error) {
		return f, Usage("--fault silence:current@3, --fault unplug:load@3+2, --fault swapped:gate,current@start", "--fault %s: %w", text, fmt.Errorf(format, args...))
	}
	seconds := func(s string) (float64, bool) {
		x, err := strconv.ParseFloat(s, 64)
		return x, err == nil && x >= 0 && x <= 86400
	}
	rest, long, limited := strings.Cut(text, "+")
	rest, when, timed := strings.Cut(rest, "@")
	kind, role, named := strings.Cut(rest, ":")
	if !slices.Contains(kinds, kind) {
		return bad("no fault %q; there are %s", kind, strings.Join(kinds, ", "))
	}
	role, with, two := strings.Cut(role, ",")
	f.Kind, f.Role, f.With = kind, role, with
	switch {
	case !named || role == "":
		return bad("of which meter or supply?")
	case two != (kind == rehearsal.Swapped) || two && (with == "" || with == role):
		return bad("swapped names two meters, every other fault one meter or supply")
	}
	if timed {
		f.Start = when == "start"
		var ok bool
		if f.At, ok = seconds(when); !ok && !f.Start {
			return bad("%q is no time: seconds, or start", when)
		}
	}
	if limited {
		var ok bool
		if f.For, ok = seconds(long); !ok || f.For == 0 {
			return bad("%q is no time it could last, in seconds", long)
		}
	}
	return f, nil
}

// checkFaults refuses faults that the simulated bench cannot have.
func checkFaults(faults []Fault, c rehearsal.Config) error {
	if len(faults) == 0 {
		return nil
	}
	var roles []string
	for _, m := range c.Meters {
		roles = append(roles, m.Role)
	}
	for _, s := range c.Supplies {
		roles = append(roles, "supply-"+s)
	}
	for _, f := range faults {
		for _, role := range []string{f.Role, f.With} {
			if role != "" && !slices.Contains(roles, role) {
				return Usage("--fault "+f.Kind+":"+roles[0], "--fault %s: nothing on this bench is called %q; there are %s", f.Kind, role, strings.Join(roles, ", "))
			}
		}
		// The bench itself knows best which fault an instrument can have.
		b, err := rehearsal.NewBench(c)
		if err == nil {
			err = b.Fault(f.Fault)
		}
		if err != nil {
			return Usage("gatesill help sweep lists the faults", "--fault: %w", err)
		}
	}
	return nil
}

// tellFault says what is wrong on the simulated bench from now on.
func tellFault(f Fault) string {
	what := f.Kind
	for _, k := range FaultKinds() {
		if k.Kind == f.Kind {
			what = k.Kind + " (" + k.Text + ")"
		}
	}
	who := f.Role
	if f.With != "" {
		who += " and " + f.With
	}
	text := fmt.Sprintf("rehearsal: fault at %s: %s", who, what)
	if f.For > 0 {
		text += fmt.Sprintf(", for %g s", f.For)
	}
	return text
}

// faultPlan puts faults on the simulated bench when their time has come.
type faultPlan struct {
	left  []Fault
	begun time.Time // zero: no sweep has begun
}

// due takes out the faults whose time has come.
func (p *faultPlan) due(now time.Time) (out []Fault) {
	p.left = slices.DeleteFunc(p.left, func(f Fault) bool {
		ripe := f.Start || !p.begun.IsZero() && now.Sub(p.begun).Seconds() >= f.At
		if ripe {
			out = append(out, f)
		}
		return ripe
	})
	return out
}

// begin lets the time of the faults count.
func (p *faultPlan) begin(now time.Time) {
	if p.begun.IsZero() {
		p.begun = now
	}
}
