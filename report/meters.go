package report

import (
	"fmt"
	"io"
	"math"
)

// MeterRow is what one meter of a bench said while it was listened to.
type MeterRow struct {
	Role, Name, Line string

	Value float64 // SI unit; NaN: no number
	Unit  string  // SI unit
	Text  string  // the last reading as it is shown; "" none
	State string  // "ok", or why the reading cannot be taken, or what is wrong with the line

	Readings  int     // that came in
	BadFrames int     // that could not be read
	Rate      float64 // readings a second; NaN not known
	Age       float64 // s since the last one; NaN none
	Error     string  // of the line; "" none

	Isolated *bool  // nil: not said
	Due      string // date of the next calibration; "" not said
	Overdue  bool
}

// MetersTable lays out what meters said for people.
func MetersTable(w io.Writer, rows []MeterRow, style Style) error {
	p := &printer{w: w}
	if len(rows) == 0 {
		p.line("No meters.")
		return p.err
	}
	var roles, names, texts, rates, ages, states, lines []string
	for _, r := range rows {
		roles, names = append(roles, Clean(r.Role)), append(names, Clean(r.Name))
		texts, states, lines = append(texts, Clean(r.Text)), append(states, Clean(r.State)), append(lines, Clean(r.Line))
		rates, ages = append(rates, oneDecimal(r.Rate)), append(ages, oneDecimal(r.Age))
	}
	p.grid(grid{style: style, cols: []column{
		{head: "role", cells: roles}, {head: "meter", cells: names, wrap: 12, rank: 2}, {head: "says", cells: texts, right: true}, {head: "state", cells: states, wrap: 12},
		{head: "readings", unit: "1/s", cells: rates, right: true, rank: 1}, {head: "age", unit: "s", cells: ages, right: true, rank: 1}, {head: "line", cells: lines, rank: 3},
	}})
	return p.err
}

func oneDecimal(x float64) string {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return ""
	}
	return fmt.Sprintf("%.1f", x)
}

type meterDoc struct {
	Schema    int      `json:"schema"`
	Role      string   `json:"role"`
	Meter     optional `json:"meter"`
	Line      string   `json:"line"`
	Value     number   `json:"value"`
	Unit      optional `json:"unit"`
	State     string   `json:"state"`
	Readings  int      `json:"readings"`
	BadFrames int      `json:"bad_frames"`
	Rate      number   `json:"rate_per_s"`
	Age       number   `json:"age_s"`
	Error     optional `json:"error"`
	Isolated  *bool    `json:"isolated"`
	Due       optional `json:"due"`
	Overdue   bool     `json:"overdue"`
}

// MetersJSON writes one JSON object a line for each meter.
func MetersJSON(w io.Writer, rows []MeterRow) error {
	for _, r := range rows {
		err := writeLine(w, meterDoc{
			Schema, r.Role, optional(r.Name), r.Line, number(r.Value), optional(r.Unit), r.State, r.Readings, r.BadFrames, number(r.Rate), number(r.Age),
			optional(r.Error), r.Isolated, optional(r.Due), r.Overdue,
		})
		if err != nil {
			return err
		}
	}
	return nil
}

// PortRow is a device that is plugged in and that a meter may hang on.
type PortRow struct {
	Line   string // lasting name
	Device string // what it stands for now
	Kind   string // "serial", "usbtmc"
	Access string // "" it may be opened; else why not and what helps
	Shared bool   // the name tells the socket, not the device: another one says it is the same
}

// PortsTable lists devices that are plugged in for people.
func PortsTable(w io.Writer, rows []PortRow, style Style) error {
	p := &printer{w: w}
	var names, devices, kinds, access []string
	for _, r := range rows {
		a := "yes"
		if r.Access != "" {
			a = "NO"
		}
		names, devices, kinds, access = append(names, Clean(r.Line)), append(devices, Clean(r.Device)), append(kinds, Clean(r.Kind)), append(access, a)
	}
	p.grid(grid{style: style, cols: []column{
		{head: "line", cells: names}, {head: "kind", cells: kinds, rank: 2}, {head: "now", cells: devices, rank: 1}, {head: "may be opened", cells: access},
	}})
	for _, r := range rows {
		if r.Shared {
			wrapped(p, "", "  ", Clean(r.Line)+" names the socket it is plugged into, because another adapter bears the same number: leave it there.", style.Width)
		}
	}
	for _, r := range rows {
		if r.Access != "" {
			wrapped(p, "", "  ", Clean(r.Line)+": "+Clean(r.Access), style.Width)
		}
	}
	return p.err
}

type portDoc struct {
	Schema int      `json:"schema"`
	Line   string   `json:"line"`
	Device string   `json:"device"`
	Kind   string   `json:"kind"`
	Access optional `json:"no_access"`
	Shared bool     `json:"names_socket"`
}

// PortsJSON writes one JSON object a line for each device.
func PortsJSON(w io.Writer, rows []PortRow) error {
	for _, r := range rows {
		if err := writeLine(w, portDoc{Schema, r.Line, r.Device, r.Kind, optional(r.Access), r.Shared}); err != nil {
			return err
		}
	}
	return nil
}
