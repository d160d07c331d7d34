package report

import (
	"io"

	"gatesill/fit"
	"gatesill/store/record"
)

// LotFile is all that is known of one lot besides its curves.
type LotFile struct {
	LotRow
	Devices  []record.Device
	Sources  []record.Source
	Sessions []record.Session
	Sets     []record.Set    // with a device of the lot, by number
	Changes  []record.Change // of the part and of the lot, ascending by time each
}

// LotFileText shows one lot for people: facts, part, devices, files, changes.
func LotFileText(w io.Writer, f LotFile, style Style) error {
	if err := LotCard(w, f.LotRow, style); err != nil {
		return err
	}
	p := &printer{w: w}
	p.line("")
	p.line("%s", style.paint("Devices", bold))
	if len(f.Devices) == 0 {
		p.line("None yet.")
	} else {
		p.grid(deviceGrid(f.Devices, style))
	}
	if len(f.Sets) > 0 {
		p.line("")
		p.line("%s", style.paint("Sets", bold))
		setList(p, f.Sets, style)
	}
	p.line("")
	p.line("%s", style.paint("Files", bold))
	for _, s := range f.Sources {
		p.line("  %s, %s layout, %d bytes, imported %s", Clean(s.Name), Clean(s.Layout), s.Size, s.ImportedAt)
	}
	if len(f.Sources) == 0 {
		p.line("None.")
	}
	p.line("")
	p.line("%s", style.paint("Changes", bold))
	for _, c := range f.Changes {
		wrapped(p, "  ", "    ", changeWords(c), style.Width)
	}
	return p.err
}

func deviceGrid(devices []record.Device, style Style) grid {
	n := len(devices)
	names, packages, roles, codes, notes := make([]string, n), make([]string, n), make([]string, n), make([]string, n), make([]string, n)
	for i, d := range devices {
		names[i], packages[i], codes[i] = Clean(d.Name), Clean(packageWords(d)), Clean(d.DateCode)
		switch {
		case d.Excluded:
			roles[i] = "excluded"
			notes[i] = Clean(d.Why)
		default:
			roles[i], notes[i] = string(d.Role), Clean(d.Note)
		}
	}
	return grid{style: style, cols: []column{
		{head: "device", cells: names}, {head: "package", cells: packages, rank: 1}, {head: "role", cells: roles},
		{head: "date code", cells: codes, rank: 2}, {head: "note", cells: notes, rank: 1, wrap: 30},
	}}
}

// LotFileJSON writes one lot with its part, devices, files and changes.
func LotFileJSON(w io.Writer, f LotFile) error {
	type device struct {
		Device   string   `json:"device"`
		Package  optional `json:"package"`
		Side     optional `json:"side"`
		Role     string   `json:"role"`
		Excluded bool     `json:"excluded"`
		Why      optional `json:"why"`
		Note     optional `json:"note"`
	}
	type source struct {
		File     string `json:"file"`
		Layout   string `json:"layout"`
		Bytes    int64  `json:"bytes"`
		SHA256   string `json:"sha256"`
		Imported string `json:"imported"`
	}
	devices, sources, changes := rows{}, rows{}, rows{}
	for _, d := range f.Devices {
		devices = append(devices, device{d.Name, optional(d.Package), optional(d.Side), string(d.Role), d.Excluded, optional(d.Why), optional(d.Note)})
	}
	for _, s := range f.Sources {
		sources = append(sources, source{s.Name, s.Layout, s.Size, s.Hash, s.ImportedAt})
	}
	for _, c := range f.Changes {
		changes = append(changes, changeDocOf(c))
	}
	return writeObject(w, member{"schema", Schema}, member{"lot", f.Lot.Name}, member{"facts", lotRowDocOf(f.LotRow)},
		member{"devices", devices}, member{"sets", storedSetDocs(f.Sets)}, member{"files", sources}, member{"changes", changes})
}

// CodesTable explains every warning and flag code for people.
func CodesTable(w io.Writer, codes []fit.CodeInfo, style Style) error {
	p := &printer{w: w}
	for _, c := range codes {
		p.line("%s", style.paint(c.Code, bold))
		wrapped(p, "    ", "    ", c.Meaning, style.Width)
		wrapped(p, "    ", "    ", c.Next, style.Width)
	}
	return p.err
}

// Sentences writes sentences for people, one below the other.
func Sentences(w io.Writer, list []string, style Style) error {
	p := &printer{w: w}
	for _, s := range list {
		wrapped(p, "", "  ", Clean(Sentence(s)), style.Width)
	}
	return p.err
}

// CodesJSON writes every warning and flag code with its meaning.
func CodesJSON(w io.Writer, codes []fit.CodeInfo) error {
	type code struct {
		Code    string `json:"code"`
		Meaning string `json:"meaning"`
		Next    string `json:"next"`
	}
	docs := rows{}
	for _, c := range codes {
		docs = append(docs, code{c.Code, c.Meaning, c.Next})
	}
	return writeObject(w, member{"schema", Schema}, member{"codes", docs})
}

// BackupJSON tells where a copy of the store was written.
func BackupJSON(w io.Writer, store, file string) error {
	return writeObject(w, member{"schema", Schema}, member{"store", store}, member{"file", file})
}
