// Package job does what a verb asks for from beginning to end: it reads through
// acquire, keeps in store, has fit compute and report lay out. No other package
// joins all four.
//
// SQL and numerics stay out of it, and it parses no flags.
package job

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"time"

	"gatesill/acquire/table"
	"gatesill/fit"
	"gatesill/report"
	"gatesill/store"
	"gatesill/store/record"
)

// Env is what every job works in.
type Env struct {
	Store string    // path of the store; "": the default one
	Out   io.Writer // results
	Err   io.Writer // talk
	Width int       // columns of the terminal on Out, 0: none

	JSON, Color, Quiet, Verbose, Yes bool

	Ask      func(table.Question) (string, error) // nil: stdin is no terminal
	Progress bool                                 // Err is a terminal
	Who      string                               // for the audit trail
	Version  string                               // of the program
}

// Exit codes, as promised to scripts.
const (
	ExitDone        = 0
	ExitFailed      = 1   // something was refused or went wrong
	ExitUsage       = 2   // used wrongly
	ExitNo          = 3   // --fail, and the answer is no
	ExitInstrument  = 4   // instrument or port trouble
	ExitInterrupted = 130 // Ctrl-C
)

// Failure is an error with the exit code it ends in and the next command to
// type.
type Failure struct {
	Code int
	Err  error // nil: everything has been said already
	Hint string
}

// Error gives the text of the error, without the hint.
func (f *Failure) Error() string {
	if f.Err == nil {
		return fmt.Sprintf("exit code %d", f.Code)
	}
	return f.Err.Error()
}

// Unwrap gives the error behind.
func (f *Failure) Unwrap() error { return f.Err }

// Usage is a failure for a command that was used wrongly.
func Usage(hint, format string, args ...any) error {
	return &Failure{Code: ExitUsage, Err: fmt.Errorf(format, args...), Hint: hint}
}

// failed is a failure of the job itself.
func failed(hint, format string, args ...any) error {
	return &Failure{Code: ExitFailed, Err: fmt.Errorf(format, args...), Hint: hint}
}

// warn tells of something that does not stop the job.
func (e *Env) warn(format string, args ...any) {
	fmt.Fprintf(e.Err, "gatesill: warning: "+format+"\n", args...)
}

// tellWarnings tells the warnings of a result whose JSON has no place for them.
func (e *Env) tellWarnings(ws []fit.Warning) {
	for _, w := range ws {
		e.warn("%s [%s]", report.Clean(w.Text), w.Code)
	}
}

// talk says what is being done, unless told to be quiet.
func (e *Env) talk(format string, args ...any) {
	if !e.Quiet {
		fmt.Fprintf(e.Err, format+"\n", args...)
	}
}

// detail says more, when that was asked for.
func (e *Env) detail(format string, args ...any) {
	if e.Verbose {
		fmt.Fprintf(e.Err, format+"\n", args...)
	}
}

// path is the store's path, the default one when none was given.
func (e *Env) path() (string, error) {
	if e.Store != "" {
		return e.Store, nil
	}
	return store.DefaultPath()
}

// open opens the store. Jobs that only look take readOnly, so that a store on a
// locked card can still be read.
func (e *Env) open(ctx context.Context, create, readOnly bool) (*store.DB, error) {
	path, err := e.path()
	if err != nil {
		return nil, failed("name one with --store PATH", "%w", err)
	}
	o := store.Options{Create: create, ReadOnly: readOnly, Wait: 10 * time.Second, Who: e.Who}
	db, err := store.Open(ctx, path, o)
	if errors.Is(err, store.ErrOlder) {
		// Bringing it forward needs writing, once; the old one stays beside it.
		o.ReadOnly = false
		if db, err = store.Open(ctx, path, o); err == nil {
			e.talk("store %s was brought to this version's form; a copy of the old one lies beside it", report.Clean(path))
		}
	}
	if err != nil {
		return nil, storeFailure(err)
	}
	e.detail("store: %s, program %s", db.Path(), e.Version)
	return db, nil
}

// storeFailure adds exit code and hint to an error of the store.
func storeFailure(err error) error {
	var f *Failure
	if err == nil || errors.As(err, &f) || errors.Is(err, context.Canceled) {
		return err
	}
	var of *store.Error
	if errors.As(err, &of) {
		return &Failure{Code: ExitFailed, Err: err, Hint: of.Hint}
	}
	return &Failure{Code: ExitFailed, Err: err}
}

// view runs f in a read transaction of the store.
func (e *Env) view(ctx context.Context, f func(*store.Tx) error) error {
	db, err := e.open(ctx, false, true)
	if err != nil {
		return err
	}
	err = db.View(ctx, f)
	return storeFailure(errors.Join(err, db.Close()))
}

// update runs f in a write transaction of an existing store.
func (e *Env) update(ctx context.Context, create bool, f func(*store.Tx) error) error {
	db, err := e.open(ctx, create, false)
	if err != nil {
		return err
	}
	err = db.Update(ctx, f)
	return storeFailure(errors.Join(err, db.Close()))
}

// lotOf finds a lot by name, with a hint that lists the lots when there is none.
func lotOf(tx *store.Tx, name string) (record.Lot, record.Part, error) {
	lot, err := tx.Lot(name)
	if errors.Is(err, store.ErrNotFound) {
		return lot, record.Part{}, failed("gatesill lot list shows the lots", "lot %q: not in this store", name)
	}
	if err != nil {
		return lot, record.Part{}, err
	}
	part, err := tx.PartByID(lot.PartID)
	return lot, part, err
}

// WriteFile writes a file through a neighbour that is renamed at the end, so
// that a failed job leaves the old file as it was. A link is followed; what is
// no regular file (a device, a pipe) is written to as it is. "-" is stdout.
func (e *Env) WriteFile(path string, write func(io.Writer) error) error {
	if path == "-" {
		return write(e.Out)
	}
	if real, err := filepath.EvalSymlinks(path); err == nil {
		path = real
	}
	mode := os.FileMode(0o644)
	switch st, err := os.Stat(path); {
	case err != nil:
	case st.IsDir():
		return failed("name a file in it", "%s is a folder", path)
	case !st.Mode().IsRegular():
		return writeInto(path, write)
	default:
		mode = st.Mode().Perm()
	}
	folder := filepath.Dir(path)
	if _, err := os.Stat(folder); errors.Is(err, fs.ErrNotExist) {
		return failed("make the folder first, or name a file in one that is there", "%s: there is no folder %s", path, folder)
	}
	f, err := os.CreateTemp(folder, ".gatesill-*")
	if err != nil {
		var of *fs.PathError // names a file that nobody asked for
		if errors.As(err, &of) {
			err = of.Err
		}
		return failed("", "%s: no file can be made in %s: %w", path, folder, err)
	}
	err = write(f)
	if cerr := f.Chmod(mode); err == nil && !errors.Is(cerr, errors.ErrUnsupported) {
		err = cerr
	}
	if cerr := f.Close(); err == nil {
		err = cerr
	}
	if err == nil {
		err = os.Rename(f.Name(), path)
	}
	if err != nil {
		return errors.Join(failed("", "%s: %w", path, err), os.Remove(f.Name()))
	}
	return nil
}

// writeInto writes to a device or a pipe.
func writeInto(path string, write func(io.Writer) error) error {
	f, err := os.OpenFile(path, os.O_WRONLY, 0)
	if err != nil {
		return failed("", "%w", err)
	}
	err = write(f)
	if cerr := f.Close(); err == nil {
		err = cerr
	}
	if err != nil {
		return failed("", "%s: %w", path, err)
	}
	return nil
}
