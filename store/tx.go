package store

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"os"
	"strings"
	"time"

	"github.com/google/uuid"

	"gatesill/store/record"
)

// Tx is one transaction. It is good until the function it was given to returns,
// in one goroutine.
type Tx struct {
	ctx  context.Context // of the statements; the transaction watches the caller's
	live context.Context // the caller's
	sql  *sql.Tx
	path string
	who  string
}

// View runs f on one snapshot of the store: what others write meanwhile is not
// seen. Writing fails with [ErrReadOnly].
func (db *DB) View(ctx context.Context, f func(*Tx) error) error {
	t, err := db.reads.BeginTx(ctx, &sql.TxOptions{ReadOnly: true})
	if err != nil {
		return wrap(db.path, err)
	}
	defer t.Rollback()
	err = f(db.tx(ctx, t))
	_ = t.Rollback() // nothing was written
	return db.explain(err)
}

// Update runs f in one write transaction. When it returns nil all of it is on
// the disk; when f or the commit fails, or f panics, or ctx ends, none of it is.
//
// Errors: what f returned, [ErrReadOnly], [ErrBusy] when another writer did not
// finish in time, [ErrFull], [ErrNoStore] when the file was removed or replaced
// since it was opened, the error of ctx.
func (db *DB) Update(ctx context.Context, f func(*Tx) error) error {
	if db.writes == nil {
		return wrap(db.path, ErrReadOnly)
	}
	if err := db.takeTurn(ctx); err != nil {
		return err
	}
	defer func() { db.writing <- struct{}{} }()
	t, err := db.writes.BeginTx(ctx, nil)
	if err != nil {
		return wrap(db.path, err)
	}
	defer t.Rollback()
	if err := db.stillThere(); err != nil {
		return err
	}
	if err := f(db.tx(ctx, t)); err != nil {
		_ = t.Rollback() // at the latest when the connection is closed
		return db.explain(err)
	}
	return wrap(db.path, t.Commit())
}

// explain adds to an error of a damaged file what a look at the whole file
// finds.
func (db *DB) explain(err error) error {
	if !errors.Is(err, ErrCorrupt) {
		return err
	}
	var fault string
	if e := db.reads.QueryRow(`PRAGMA quick_check(1)`).Scan(&fault); e != nil || fault == "ok" {
		return err
	}
	return wrap(db.path, fmt.Errorf("%w; the first fault of the file: %s", err, strings.ReplaceAll(fault, "\n", " ")))
}

// takeTurn waits for the other writers of this process.
func (db *DB) takeTurn(ctx context.Context) error {
	timer := time.NewTimer(max(db.wait, time.Nanosecond))
	defer timer.Stop()
	select {
	case <-db.writing:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	case <-timer.C:
		return wrap(db.path, fmt.Errorf("%w: this one is writing already", ErrBusy))
	}
}

// stillThere fails when the path does not lead to the opened file any more:
// what is written to a removed file is lost.
func (db *DB) stillThere() error {
	info, err := os.Stat(db.path)
	if err != nil || !os.SameFile(info, db.info) {
		return wrap(db.path, fmt.Errorf("%w: the file was removed or replaced while it was open", ErrNoStore))
	}
	return nil
}

func (db *DB) tx(ctx context.Context, t *sql.Tx) *Tx {
	// The driver starts a goroutine for each statement whose context can end.
	// The transaction ends with the caller's context anyway.
	return &Tx{ctx: context.WithoutCancel(ctx), live: ctx, sql: t, path: db.path, who: db.who}
}

// fail wraps an error of a statement, with the noun it concerns.
func (tx *Tx) fail(noun string, err error) error {
	switch {
	case err == nil:
		return nil
	case tx.live.Err() != nil: // the transaction is gone for this reason
		return fmt.Errorf("%s: %w", noun, tx.live.Err())
	case errors.Is(err, sql.ErrNoRows):
		return fmt.Errorf("%s: %w", noun, ErrNotFound)
	}
	err = named(err)
	switch {
	case errors.Is(err, ErrCorrupt):
	// What follows is not about the file.
	case errors.Is(err, ErrExists):
		return fmt.Errorf("%s: %w", noun, ErrExists)
	case errors.Is(err, ErrNotFound):
		return fmt.Errorf("%s: what it belongs to is %w", noun, ErrNotFound)
	case errors.Is(err, record.ErrInvalid):
		return fmt.Errorf("%s: %w", noun, err)
	}
	return wrap(tx.path, fmt.Errorf("%s: %w", noun, err))
}

// exec runs a statement that returns no rows; noun says in an error what it was
// about.
func (tx *Tx) exec(noun, query string, args ...any) error {
	_, err := tx.sql.ExecContext(tx.ctx, query, args...)
	return tx.fail(noun, err)
}

// row is one row of a result.
type row interface{ Scan(dest ...any) error }

// all gives the rows of a query as scan makes them.
func all[T any](tx *Tx, noun string, scan func(row) (T, error), query string, args ...any) ([]T, error) {
	rows, err := tx.sql.QueryContext(tx.ctx, query, args...)
	if err != nil {
		return nil, tx.fail(noun, err)
	}
	defer rows.Close()
	var list []T
	for rows.Next() {
		x, err := scan(rows)
		if err != nil {
			return nil, tx.fail(noun, err)
		}
		list = append(list, x)
	}
	return list, tx.fail(noun, rows.Err())
}

// one gives the single row of a query, or [ErrNotFound].
func one[T any](tx *Tx, noun string, scan func(row) (T, error), query string, args ...any) (T, error) {
	x, err := scan(tx.sql.QueryRowContext(tx.ctx, query, args...))
	return x, tx.fail(noun, err)
}

// text scans a single text.
func text(r row) (s string, err error) {
	err = r.Scan(&s)
	return s, err
}

// newID gives *id a UUID of version 7 if it has none.
func newID(id *string) error {
	if *id != "" {
		return nil
	}
	u, err := uuid.NewV7()
	if err != nil {
		return fmt.Errorf("random numbers for an id: %w", err)
	}
	*id = u.String()
	return nil
}

// orNull is NULL for the empty text.
func orNull(s string) any {
	if s == "" {
		return nil
	}
	return s
}

// maybe scans a text that may be NULL.
type maybe struct{ to *string }

// Scan reads NULL as the empty text.
func (m maybe) Scan(src any) error {
	switch v := src.(type) {
	case nil:
		*m.to = ""
	case string:
		*m.to = v
	default:
		return fmt.Errorf("text from %T", src)
	}
	return nil
}

// stamp scans a time; one that does not parse is an error. NULL is the empty text.
type stamp struct{ to *string }

// Scan checks the time as it reads it.
func (s stamp) Scan(src any) error {
	if err := maybe(s).Scan(src); err != nil {
		return err
	}
	return record.CheckStampOrDate("time", *s.to)
}

// places gives n placeholders.
func places(n int) string { return strings.TrimSuffix(strings.Repeat("?, ", n), ", ") }
