// Package table reads CSV and other text tables into sweeps: it finds encoding,
// delimiter, decimal mark, header, units, columns and layout once for the file,
// tells what it found, and refuses rows and files in plain words with their
// place.
//
// It never guesses for a single cell, never turns an overload mark or an empty
// cell into a number, stores nothing, and uses no name in a file as a path.
package table

import (
	"errors"

	"gatesill/store/record"
)

// Errors that callers tell apart. Every error of this package wraps one of them
// or an I/O error.
var (
	ErrAmbiguous = errors.New("ambiguous") // a flag settles it
	ErrRefused   = errors.New("refused")   // the file cannot be read as a table of readings
	ErrTooMany   = errors.New("too many rows refused")
)

// Error is an error with its place and the hint that settles it.
type Error struct {
	File string
	Line int    // from 1; 0: the file as a whole
	Err  error  // wraps one of the errors above
	Hint string // what to type next, "" if there is nothing
}

// Question is something that the file leaves open.
type Question struct {
	Text    string   // one sentence
	Choices []string // what may be answered, as the flag takes it; empty: anything the flag takes
	Default string   // what an empty answer means; "" it must be answered
	Flag    string   // flag that answers it: "--decimal"
}

// Role is what a column may hold besides the record quantities.
type Role string

// The roles of columns that hold no measured quantity.
const (
	RoleDevice   Role = "device"
	RoleLot      Role = "lot"
	RolePackage  Role = "package"
	RoleSide     Role = "side"
	RoleDate     Role = "date"
	RoleOperator Role = "operator"
	RoleFixture  Role = "fixture"
	RoleDateCode Role = "date-code"
	RoleMarking  Role = "marking"
	RoleTube     Role = "tube"
	RoleNote     Role = "note"
	RoleSweep    Role = "sweep" // number or direction of the sweep; where it changes another sweep begins
	RoleRL       Role = "rl"    // load resistor, ohm; kept with the condition
	RoleIgnore   Role = "ignore"
)

// Options are the choices given by flags; the zero value finds everything out.
type Options struct {
	Map         map[string]string // quantity or role by its short name (vg, id, vl, vd, vdd, ig, gm, temp, t, device, lot, ...) to column header or number (from 1)
	Units       map[string]string // short name to unit with prefix: "vg": "V", "id": "mA"; "vgs" is taken as vg
	Decimal     string            // "", "point", "comma"
	Delimiter   string            // "", "comma", "semicolon", "tab", "pipe", "blank", or the character itself
	Encoding    string            // "", "utf-8", "utf-16", "windows-1252"
	SpotCurrent record.Num        // A
	LotColumn   string
	PChannel    bool             // signs of the part, for what 'rises' means
	Given       record.Condition // conditions given by flags; they win over what the file says
	Strict      bool
	Remembered  func(signature string) (map[string]string, bool) // column mapping settled earlier for this header; nil: none
	Ask         func(Question) (string, error)                   // nil: refuse with ErrAmbiguous
	Progress    func(done, total int64)                          // bytes; nil: none
	MaxBytes    int64                                            // 0: 1 GiB
}

// Refusal is a row that could not be used.
type Refusal struct {
	Line   int
	Reason string
	Text   string // the row, cut to 80 characters
}

// ColumnFound is what one column was taken for.
type ColumnFound struct {
	Number int    `json:"number"` // from 1
	Header string `json:"header"`
	As     string `json:"as"`   // short name: vg, id, ..., device, ..., ignore
	Unit   string `json:"unit"` // as read: "mA"; "" for texts
	How    string `json:"how"`  // "header", "--map", "--lot-column", "remembered", "behaviour", "position", "unit", "asked"
}

// Dialect is what was recognised about the text of the file.
type Dialect struct {
	Encoding  string        `json:"encoding"`
	Delimiter string        `json:"delimiter"`
	Decimal   string        `json:"decimal"` // "point", "comma"
	Header    int           `json:"header"`  // line of the header, 0: none
	UnitLine  int           `json:"unit_line"`
	Comments  int           `json:"comments"` // comment lines
	Columns   []ColumnFound `json:"columns"`
	Signature string        `json:"signature"` // of the header, for remembering the mapping
	Notes     []string      `json:"notes"`     // what was decided and why, in sentences
}

// Sweep is one sweep of one device as it stands in the file.
type Sweep struct {
	Device       string
	Lot          string // from a lot column, else ""
	Package      string
	Side         string
	Date         string
	Operator     string
	Fixture      string
	DateCode     string
	Marking      string
	Tube         string
	Note         string
	record.Sweep // Direction, Condition (what the file proposes, flags applied), Columns with Text, Marks, Lines, DataHash
}

// Remark is something to tell the user; Code as in fit.Codes.
type Remark struct {
	Code string
	Text string
}

// File is what was read from one file.
type File struct {
	Name    string // as given, without its folder
	Hash    string // SHA-256 of the bytes, hex
	Size    int64
	Layout  string // "long", "wide", "per-device", "spot"
	Dialect Dialect
	Sweeps  []Sweep

	Rows     int // data rows seen
	Points   int // points in all sweeps
	States   int // cells with a state (overload, missing) instead of a number
	Refused  int
	Refusals []Refusal // the first ten
	Proposed []string  // conditions found in comments, in sentences
	Remarks  []Remark
}
