package job

import (
	"strings"

	"gatesill/acquire"
	"gatesill/acquire/bench"
	"gatesill/acquire/meter"
)

// Sources are the lines of a bench as they are listened to: meters on one line are
// the columns of one source. Meters without a line are left out.
func Sources(b *bench.Bench) []acquire.Source {
	var out []acquire.Source
	at := map[string]int{} // source of each line
	for i, l := range b.Lines {
		if l.Path == "" {
			continue
		}
		k, known := at[l.Path]
		if !known {
			k = len(out)
			at[l.Path] = k
			out = append(out, acquire.Source{
				Address: l.Path, Settings: l.Settings, Speaks: l.Speaks, Setup: l.Setup, Ask: l.Ask, Every: l.Every.Or(askedEvery(l.Speaks)),
				Options: meter.Options{Unit: columnUnits(b, l.Path), Separator: l.Separator, Decimal: l.Decimal},
			})
		}
		in := b.Meters[i]
		out[k].Columns = append(out[k].Columns, acquire.SourceColumn{Column: l.Column, Role: in.Role, Meter: in.Name, Unit: bench.RoleUnit(in.Role)})
	}
	return out
}

// askedEvery is the pause between two questions where the bench file names none, s:
// a fast instrument would fill the store with thousands of readings a second, of
// which a hand or a settling gate has no use.
func askedEvery(speaks string) float64 {
	if speaks == "scpi" {
		return 0.05
	}
	return 0
}

// columnUnits joins the units that the file gives to the columns of a line; "" when
// it gives none.
func columnUnits(b *bench.Bench, path string) string {
	var units []string
	for _, l := range b.Lines {
		if l.Path != path || l.Unit == "" {
			continue
		}
		for len(units) < l.Column {
			units = append(units, "")
		}
		units[l.Column-1] = l.Unit
	}
	return strings.Join(units, ",")
}

// Timings are what the bench file says of when its meters measure, by role. What it
// does not say is zero, but for LagU, then NaN ([acquire.Timing] takes one cycle), and
// for how long a USB adapter holds bytes back: the worst that is usual.
func Timings(b *bench.Bench) map[string]acquire.Timing {
	out := map[string]acquire.Timing{}
	for i, in := range b.Meters {
		l := b.Lines[i]
		if l.Path == "" {
			continue
		}
		t := acquire.Timing{Integration: l.Integration.Or(0), Processing: l.Processing.Or(0), Lag: l.Lag.Or(0), LagU: l.LagU.Float()}
		for _, lead := range []string{"/dev/serial/", "/dev/ttyUSB", "COM"} {
			if strings.HasPrefix(l.Path, lead) {
				t.Jitter = adapterHold
			}
		}
		out[in.Role] = t
	}
	return out
}

// adapterHold is how long USB serial adapters hold back bytes of a short message:
// 16 ms is the usual setting of their timer. Common practice, no source.
const adapterHold = 0.016

// pairingOf says how the readings of a bench's meters become points in a sweep of
// that mode.
func pairingOf(b *bench.Bench, mode acquire.Mode) acquire.Pairing {
	p := acquire.Pairing{Timing: Timings(b), Twice: map[string]bool{}, Free: mode == acquire.Free}
	for i, m := range b.Meters {
		f, ok := meter.Find(b.Lines[i].Speaks)
		p.Twice[m.Role] = ok && f.Twice
	}
	if mode == acquire.Driven {
		p.Window = drivenWindow
	}
	return p
}
