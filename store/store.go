// Package store keeps parts, lots, devices, sweeps, estimates and their audit
// trail in one SQLite file. It is the only place with SQL.
//
// Raw readings are never changed or deleted, and it computes nothing: no
// statistics, no fits.
package store

import "errors"

// Errors that callers tell apart by errors.Is; the text says what to do.
var (
	ErrNotOurs  = errors.New("not a Gatesill store")
	ErrNewer    = errors.New("written by a newer Gatesill")
	ErrCorrupt  = errors.New("damaged")
	ErrReadOnly = errors.New("read-only")
	ErrFull     = errors.New("no space left")
	ErrBusy     = errors.New("in use by another program")
	ErrNoStore  = errors.New("no store there")
	ErrNotFound = errors.New("not found")
	ErrExists   = errors.New("already there")
)
