package report

import "io"

// Fates of a file that was to be imported.
const (
	FateStored  = "stored"
	FateRefused = "refused"
	FateSeen    = "seen before"
)

// ImportDoc is what an import did.
type ImportDoc struct {
	Lot   string
	Files []ImportFile
}

// ImportFile is the fate of one file.
type ImportFile struct {
	File        string
	Fate        string // one of the fates above
	Layout      string // "" when it was not found out
	Dialect     any    // as recognised, marshalled as it is; nil: {}
	Devices     int
	Sweeps      int
	Points      int
	RowsRefused int
	Reason      string // why it was refused, "" when it was not
}

type importFileDoc struct {
	File        string   `json:"file"`
	Fate        string   `json:"fate"`
	Layout      optional `json:"layout"`
	Dialect     any      `json:"dialect"`
	Devices     int      `json:"devices"`
	Sweeps      int      `json:"sweeps"`
	Points      int      `json:"points"`
	RowsRefused int      `json:"rows_refused"`
	Reason      optional `json:"reason"`
}

// ImportJSON writes what `import --json` gives.
func ImportJSON(w io.Writer, doc ImportDoc) error {
	files := make(rows, 0, len(doc.Files))
	for _, f := range doc.Files {
		if f.Dialect == nil {
			f.Dialect = struct{}{}
		}
		files = append(files, importFileDoc{f.File, f.Fate, optional(f.Layout), f.Dialect, f.Devices, f.Sweeps, f.Points, f.RowsRefused, optional(f.Reason)})
	}
	return writeObject(w, member{"schema", Schema}, member{"lot", doc.Lot}, member{"files", files})
}

// ImportTable writes the fate of each file for people. Why a file was refused
// is not said here: that is told as an error while the files are read.
func ImportTable(w io.Writer, doc ImportDoc, style Style) error {
	p := &printer{w: w}
	p.line("Lot %s", Clean(doc.Lot))
	p.line("")
	var files, fates, layouts, devices, sweeps, points, refused []string
	for _, f := range doc.Files {
		files, fates, layouts = append(files, Clean(f.File)), append(fates, f.Fate), append(layouts, Clean(f.Layout))
		devices, sweeps, points = append(devices, itoa(f.Devices)), append(sweeps, itoa(f.Sweeps)), append(points, itoa(f.Points))
		refused = append(refused, itoa(f.RowsRefused))
	}
	p.grid(grid{style: style, cols: []column{
		{head: "file", cells: files, wrap: 24}, {head: "fate", cells: fates}, {head: "layout", cells: layouts, rank: 1},
		{head: "devices", cells: devices, right: true}, {head: "sweeps", cells: sweeps, right: true},
		{head: "points", cells: points, right: true}, {head: "rows refused", cells: refused, right: true},
	}})
	for _, f := range doc.Files {
		if f.Reason != "" && f.Fate != FateRefused {
			wrapped(p, "  ", "    ", Clean(f.File)+": "+Clean(f.Reason), style.Width)
		}
	}
	return p.err
}
