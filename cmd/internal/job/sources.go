package job

import (
	"strings"

	"gatesill/acquire"
	"gatesill/acquire/bench"
)

// roleUnit is the SI unit in which a role is read.
func roleUnit(role string) string {
	switch role {
	case acquire.Current:
		return "A"
	case acquire.Temperature:
		return "degC"
	}
	return "V"
}

// Sources are the lines of a bench as they are listened to: one for each address,
// with the columns of its meters.
func Sources(b *bench.Bench) []acquire.Source {
	var out []acquire.Source
	at := map[string]int{}
	units := map[string]map[int]string{}
	for i, m := range b.Meters {
		l := b.Lines[i]
		if l.Path == "" {
			continue
		}
		k, ok := at[l.Path]
		if !ok {
			k = len(out)
			at[l.Path], units[l.Path] = k, map[int]string{}
			out = append(out, acquire.Source{Address: l.Path})
		}
		s := &out[k]
		s.Settings, s.Speaks, s.Ask = first(s.Settings, l.Settings), first(s.Speaks, l.Speaks), first(s.Ask, l.Ask)
		s.Options.Separator, s.Options.Decimal = first(s.Options.Separator, l.Separator), first(s.Options.Decimal, l.Decimal)
		if len(s.Setup) == 0 {
			s.Setup = l.Setup
		}
		if s.Every == 0 {
			s.Every = l.Every.Or(0)
		}
		s.Columns = append(s.Columns, acquire.SourceColumn{Column: l.Column, Role: m.Role, Meter: m.Name, Unit: roleUnit(m.Role)})
		if l.Unit != "" {
			units[l.Path][max(l.Column, 1)] = l.Unit
		}
		most := 0
		for c := range units[l.Path] {
			most = max(most, c)
		}
		list := make([]string, most)
		for c, u := range units[l.Path] {
			list[c-1] = u
		}
		s.Options.Unit = strings.Join(list, ",")
	}
	return out
}

// Timings says of every meter of a bench when it measures what it says.
func Timings(b *bench.Bench) map[string]acquire.Timing {
	out := map[string]acquire.Timing{}
	for i, m := range b.Meters {
		l := b.Lines[i]
		out[m.Role] = acquire.Timing{Integration: l.Integration.Or(0), Processing: l.Processing.Or(0), LagU: l.LagU.Or(0)}
	}
	return out
}
