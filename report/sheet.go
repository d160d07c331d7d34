// Package report lays out what is known of a lot: tables for the terminal,
// CSV and JSON for programs; its subpackages draw plots and write the page.
//
// It computes no results, reads no store, and writes no number without its
// unit. SI prefixes are used here and nowhere deeper.
package report

import (
	"gatesill/fit"
	"gatesill/fit/lot"
	"gatesill/store/record"
)

// Sheet is everything that is known of one lot, ready to be laid out. The job
// that fills it decides nothing.
type Sheet struct {
	Part     record.Part
	Lot      record.Lot
	Sources  []record.Source
	Sessions []record.Session
	Devices  []Device // every device of the lot, dead and excluded ones too, in natural order of their names

	SortedBy    fit.Key // quantity that sorting uses
	TestCurrent float64 // A, at which Vgsth was taken; NaN when there is none
	TestBasis   string  // where it came from: "part", "--at", "spot list", "default"
	IdleCurrent float64 // A; NaN: the part has none

	Spread  lot.Spread
	Sorting *lot.Sorting // nil: not sorted
	Version string       // of the program
	Hash    string       // SHA-256 over the canonical data, hex
	Latest  string       // latest time stamp in the data: the page has no present time
}

// Device is one device with its sweeps and what was made of them.
type Device struct {
	record.Device
	Result fit.Result // over its sweeps; State Excluded when it is excluded
	Sweeps []Sweep
}

// Sweep is one sweep with its own result.
type Sweep struct {
	record.Sweep
	SourceName string
	Result     fit.Result
	Curve      fit.Curve // as handed to the fit, left-out points still in it
}
