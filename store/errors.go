package store

import (
	"errors"
	"fmt"
	"io/fs"

	"modernc.org/sqlite"
	sqlite3 "modernc.org/sqlite/lib"

	"gatesill/store/record"
)

// Error is an error with the store it concerns and the hint that helps.
type Error struct {
	Path string
	Err  error  // wraps one of the errors of this package, of package fs, or of the operating system
	Hint string // what to do next, "" if there is nothing
}

// Error says which store and what is wrong.
func (e *Error) Error() string { return fmt.Sprintf("store %s: %v", e.Path, e.Err) }

// Unwrap gives the cause.
func (e *Error) Unwrap() error { return e.Err }

// hints say what to do next, by cause. The first that fits is taken.
var hints = []struct {
	err  error
	text string
}{
	{ErrNoStore, "check --store and GATESILL_STORE; 'gatesill import' and 'gatesill lot add' make a store where there is none"},
	{ErrNewer, "use the newer gatesill that wrote it; this one leaves it alone"},
	{ErrCorrupt, "keep a copy of the file as it is, then use the newest backup with --store"},
	{ErrNotOurs, "nothing was changed; give the store's file with --store"},
	{ErrReadOnly, "nothing was changed; give yourself write access to the file and its folder, or use another store with --store"},
	{ErrFull, "nothing of this step was kept, all earlier ones were; free some space and repeat it"},
	{ErrBusy, "nothing of this step was kept; wait until the other program is done and repeat it"},
	{ErrExists, "give another name; nothing is ever overwritten"},
	{fs.ErrPermission, "give yourself access to the file and its folder, or use another store with --store"},
}

// wrap gives err the path of the store and the hint for its cause. Errors that
// do not concern the file (a name not found, a value not valid, a context that
// ended) stay as they are.
func wrap(path string, err error) error {
	var known *Error
	if err == nil || errors.As(err, &known) {
		return err
	}
	err = named(err)
	for _, h := range hints {
		if errors.Is(err, h.err) {
			return &Error{Path: path, Err: err, Hint: h.text}
		}
	}
	return &Error{Path: path, Err: err}
}

// named joins an error of the SQLite driver to the error of this package that
// callers know. Other errors stay as they are.
func named(err error) error {
	var e *sqlite.Error
	if !errors.As(err, &e) {
		return err
	}
	cause := causes[e.Code()]
	if cause == nil {
		cause = causes[e.Code()&0xff]
	}
	if cause == nil || errors.Is(err, cause) {
		return err
	}
	return fmt.Errorf("%w: %w", cause, err)
}

// causes gives the meaning of SQLite's result codes, the extended ones first.
var causes = map[int]error{
	sqlite3.SQLITE_BUSY:     ErrBusy,
	sqlite3.SQLITE_LOCKED:   ErrBusy,
	sqlite3.SQLITE_READONLY: ErrReadOnly,
	sqlite3.SQLITE_CORRUPT:  ErrCorrupt,
	sqlite3.SQLITE_NOTADB:   ErrCorrupt, // whether it is ours was seen before
	sqlite3.SQLITE_FULL:     ErrFull,
	sqlite3.SQLITE_PERM:     fs.ErrPermission,
	sqlite3.SQLITE_AUTH:     fs.ErrPermission,

	sqlite3.SQLITE_IOERR_SHMSIZE:         ErrFull, // no room for the index of the write-ahead log
	sqlite3.SQLITE_IOERR_CORRUPTFS:       ErrCorrupt,
	sqlite3.SQLITE_CONSTRAINT_UNIQUE:     ErrExists,
	sqlite3.SQLITE_CONSTRAINT_PRIMARYKEY: ErrExists,
	sqlite3.SQLITE_CONSTRAINT_FOREIGNKEY: ErrNotFound,
	sqlite3.SQLITE_CONSTRAINT_CHECK:      record.ErrInvalid,
	sqlite3.SQLITE_CONSTRAINT_NOTNULL:    record.ErrInvalid,
	sqlite3.SQLITE_CONSTRAINT_DATATYPE:   record.ErrInvalid,
}

// isCode reports whether err is an error of SQLite with that primary code.
func isCode(err error, code int) bool {
	var e *sqlite.Error
	return errors.As(err, &e) && e.Code()&0xff == code
}
