package report

import (
	"io"

	"gatesill/fit"
)

// SweepDoc is what a session at the bench brought.
type SweepDoc struct {
	Lot     string
	Session string // its id
	Devices []SweptDevice
}

// SweptDevice is one device of it.
type SweptDevice struct {
	Device   string
	Sweep    string // its id, "" when none was begun
	Points   int
	Settled  int    // of these
	Complete bool   // it went as far as it was to go
	Why      string // why it ended, one phrase
	Result   fit.Result
}

type sweptDoc struct {
	Device   string        `json:"device"`
	Sweep    optional      `json:"sweep"`
	Points   int           `json:"points"`
	Settled  int           `json:"settled"`
	Complete bool          `json:"complete"`
	Why      optional      `json:"why"`
	State    optional      `json:"state"`
	Vgsth    fit.Quantity  `json:"vgsth_V"`
	VgsIdle  fit.Quantity  `json:"vgs_idle_V"`
	Warnings []fit.Warning `json:"warnings"`
}

// SweepJSON writes what `sweep --json` gives.
func SweepJSON(w io.Writer, doc SweepDoc) error {
	devices := make(rows, 0, len(doc.Devices))
	for _, d := range doc.Devices {
		devices = append(devices, sweptDoc{
			d.Device, optional(d.Sweep), d.Points, d.Settled, d.Complete, optional(d.Why), optional(d.Result.State),
			d.Result.Vgsth, d.Result.VgsIdle, append([]fit.Warning{}, d.Result.Warnings...),
		})
	}
	return writeObject(w, member{"schema", Schema}, member{"lot", doc.Lot}, member{"session", optional(doc.Session)}, member{"devices", devices})
}

// SweepTable writes the devices of a session for people.
func SweepTable(w io.Writer, doc SweepDoc, style Style) error {
	p := &printer{w: w}
	var names, points, vth, idle, said []string
	for _, d := range doc.Devices {
		text := d.Why
		if d.Complete && d.Result.State != fit.Measured && d.Result.Why != "" {
			text = joinWords(text, d.Result.Why)
		}
		for _, warning := range d.Result.Warnings {
			if d.Complete && warning.Code != fit.CodeHeatingNotChecked && warning.Code != fit.CodeNoAccuracy {
				text = joinWords(text, warning.Text)
			}
		}
		names, points = append(names, Clean(d.Device)), append(points, itoa(d.Points))
		vth, idle = append(vth, FormatQuantity(d.Result.Vgsth, "V")), append(idle, FormatQuantity(d.Result.VgsIdle, "V"))
		said = append(said, Clean(text))
	}
	p.grid(grid{style: style, cols: []column{
		{head: "device", cells: names}, {head: "points", cells: points, right: true},
		{head: "V_GS(th)", cells: vth}, {head: "V_GS idle", cells: idle}, {head: "outcome", cells: said, wrap: 22},
	}})
	return p.err
}

func joinWords(a, b string) string {
	if a == "" {
		return b
	}
	return a + "; " + b
}
