// Package store keeps parts, lots, devices, sweeps, estimates and their audit
// trail in one SQLite file. It is the only place with SQL.
//
// Everything happens in a transaction: [DB.View] reads one state of the store,
// [DB.Update] writes all or nothing, and has written it to the disk when it
// returns. Whoever edits says why; the old value stays in the audit trail. The
// form of the file, for readers with nothing but an SQL client, is described in
// migrations/0001.sql.
//
// It refuses to change or delete what was measured, to open a file that is not
// its own, newer or damaged, and to overwrite a file. It computes nothing: no
// statistics, no fits.
package store

import "errors"

// Errors that callers tell apart by errors.Is; the text says what to do.
var (
	ErrNotOurs  = errors.New("not a Gatesill store")
	ErrNewer    = errors.New("written by a newer Gatesill")
	ErrCorrupt  = errors.New("damaged")
	ErrReadOnly = errors.New("read-only")
	ErrOlder    = errors.New("older form") // beside ErrReadOnly: opening it for writing brings it forward
	ErrFull     = errors.New("no space left")
	ErrBusy     = errors.New("in use by another program")
	ErrNoStore  = errors.New("no store there")
	ErrNotFound = errors.New("not found")
	ErrExists   = errors.New("already there")
)
