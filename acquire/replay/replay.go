// Package replay reads logs that were recorded meter by meter, each with a clock of
// its own, and brings them to one time base: readings as they would have come in
// live. Notes with times cut a log into devices.
//
// It never guesses a date: what the times leave open is asked, or refused with
// its place. Clocks that differ are brought together by what the meters saw: the
// voltage across R_L follows the drain current, and one gate voltage gives one
// current. Where that does not tell, an offset of zero is assumed and said, or the
// logs are refused when their clocks have no origin in common.
package replay

import (
	"gatesill/acquire/table"
	"gatesill/store/record"
)

// Form is how the times of a file are written: one for the whole file.
type Form string

// The forms.
const (
	Zoned      Form = "date and time with zone"
	Local      Form = "date and time without zone"
	UnixS      Form = "Unix seconds"
	UnixMS     Form = "Unix milliseconds"
	UnixUS     Form = "Unix microseconds"
	TimeOfDay  Form = "time of day"
	Elapsed    Form = "elapsed seconds"
	ElapsedHMS Form = "elapsed h:m:s"
)

// absolute reports whether times in this form are points in time.
func (f Form) absolute() bool { return f == Zoned || f == UnixS || f == UnixMS || f == UnixUS }

// elapsed reports whether times in this form count from an origin of their own.
func (f Form) elapsed() bool { return f == Elapsed || f == ElapsedHMS }

// Options are the choices given by flags; the zero value finds everything out.
type Options struct {
	Table table.Options     // Encoding, Delimiter, Decimal, Map, Units, Ask, Strict, PChannel, MaxBytes
	Times map[string]string // by role: "elapsed", "clock", when elapsed 0 was as date and time, or the role on whose clock it counts
	Zone  string            // of times without one: "+02:00", "UTC"; "" not given
	Date  string            // of the first time of day, YYYY-MM-DD; "" not given
}

// The role of the file of notes among the logs.
const notesRole = "notes"

// Log is the log of one meter as it was read.
type Log struct {
	Role    string
	Path    string // as given
	Name    string // without its folder
	Hash    string // SHA-256 of the bytes, hex
	Size    int64
	Found   Found
	Entries []Entry // times never go back

	Rows     int // data rows seen
	Refused  int
	Refusals []table.Refusal // the first ten

	start string // when elapsed 0 was, or the role whose clock counts, as given
	zones []int  // s east of UTC, as written; those that are told by Z are not among them
	jumps []jump
}

// Found is what was recognised about a log.
type Found struct {
	Role       string   `json:"role"`
	File       string   `json:"file"`
	Encoding   string   `json:"encoding"`
	Delimiter  string   `json:"delimiter"`
	Decimal    string   `json:"decimal"` // "point", "comma"
	Header     int      `json:"header"`  // line of the header, 0: none
	TimeColumn string   `json:"time_column"`
	Column     string   `json:"column"`
	Unit       string   `json:"unit"` // "" when every reading says its own
	Form       Form     `json:"times"`
	Resolution float64  `json:"time_resolution_s"`
	Cycle      float64  `json:"cycle_s"` // median step between readings
	Readings   int      `json:"readings"`
	States     int      `json:"states"` // readings without a number
	Notes      []string `json:"notes"`  // what was decided and why, in sentences
	Clock      *Clock   `json:"clock"`  // nil: the clock of the others
}

// Entry is one reading with its line.
type Entry struct {
	Line int
	record.Reading
}

// Clock is how far the clock of a log is off that of the log it was held against:
// what it shows is brought over by adding Offset, and Drift times the time since
// the middle of both.
type Clock struct {
	Against string  `json:"against"`
	Offset  float64 `json:"offset_s"`
	OffsetU float64 `json:"offset_u_s"` // standard uncertainty; 0 where assumed
	Drift   float64 `json:"drift_ppm"`  // 0 where it was not looked for
	DriftU  float64 `json:"drift_u_ppm"`
	Assumed bool    `json:"assumed"` // the readings do not tell: an offset of 0 was assumed
	Why     string  `json:"why"`     // in a sentence
	Bound   float64 `json:"bound_s"` // greatest error of the times after it
	middle  float64 // s, on the clock of the log; drift counts from there
}

// Correct gives the time of the other clock for a time of this one.
func (c *Clock) Correct(at float64) float64 {
	if c == nil {
		return at
	}
	return at + c.Offset + c.Drift*1e-6*(at-c.middle)
}

// Note is one line of the notes.
type Note struct {
	Line int
	At   float64
	Text string
	In   string // name of the device that went in, "" none
	Out  bool   // a device went out
}

// Stretch is the time one device was in the socket.
type Stretch struct {
	Device   string
	From, To float64 // s, on the common time base
	Line     int     // of the note that began it, 0: found from the readings
}

// Session is logs and notes on one time base.
type Session struct {
	Logs      []*Log
	Notes     []Note
	NotesLog  *Log
	Stretches []Stretch
	Started   string   // stamp or bare date of time 0, "" not known
	Span      float64  // s, from the first reading to the last
	Remarks   []string // what was decided between the logs, in sentences
	Warnings  []string // what may be wrong
}
