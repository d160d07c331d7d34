package store

import (
	"context"
	"database/sql"
	"embed"
	"errors"
	"fmt"
	"io/fs"
	"time"
)

//go:embed migrations/*.sql
var migrationFiles embed.FS

// migration is one step from a form of the store to the next.
type migration struct {
	name string
	sql  string
}

// migrations lead from an empty file to the form that this program knows: the
// form's number is how many there are.
var migrations = mustLoad(migrationFiles)

// mustLoad reads the steps in the order of their names. The files are part of
// the program, so an error is a fault of the build.
func mustLoad(files fs.FS) []migration {
	names, err := fs.Glob(files, "migrations/*.sql")
	if err != nil || len(names) == 0 {
		panic(fmt.Sprintf("store: migrations: %v, %d files", err, len(names)))
	}
	steps := make([]migration, len(names))
	for i, name := range names {
		if want := fmt.Sprintf("migrations/%04d.sql", i+1); name != want {
			panic("store: migration " + name + " in the place of " + want)
		}
		text, err := fs.ReadFile(files, name)
		if err != nil {
			panic("store: " + err.Error())
		}
		steps[i] = migration{name: name, sql: string(text)}
	}
	return steps
}

// upToDate brings an older store to the newest form, after copying it beside
// itself, and refuses a newer one: the header in the file may be older than the
// write-ahead log.
func (db *DB) upToDate(ctx context.Context, steps []migration) error {
	var version int
	if err := db.reads.QueryRowContext(ctx, `PRAGMA user_version`).Scan(&version); err != nil {
		return err
	}
	if version >= len(steps) {
		return header{magic: true, application: applicationID, version: uint32(version)}.check(len(steps))
	}
	if db.readOnly {
		return fmt.Errorf("%w: it has the %w %d and must be brought to form %d first", ErrReadOnly, ErrOlder, version, len(steps))
	}
	var rows int
	if version > 0 {
		if err := db.writes.QueryRowContext(ctx, rowsKept).Scan(&rows); err != nil {
			return err
		}
	}
	if rows == 0 { // its making was cut short: there is nothing to copy
		return migrate(ctx, db.writes, steps)
	}
	copied := fmt.Sprintf("%s.form%d.%s", db.path, version, time.Now().UTC().Format("20060102T150405Z"))
	if err := db.Backup(ctx, copied, nil); err != nil && !errors.Is(err, ErrExists) {
		return fmt.Errorf("copy before the change to form %d: %w", len(steps), err)
	}
	return migrate(ctx, db.writes, steps)
}

// migrate runs the steps that the file has not had yet, each in one transaction
// with the number of its form.
func migrate(ctx context.Context, pool *sql.DB, steps []migration) error {
	conn, err := pool.Conn(ctx)
	if err != nil {
		return err
	}
	defer conn.Close()
	var keys int
	if err := conn.QueryRowContext(ctx, `PRAGMA foreign_keys`).Scan(&keys); err != nil {
		return err
	}
	// A step may rebuild a table that others refer to. The references are
	// checked before it is committed.
	if _, err := conn.ExecContext(ctx, `PRAGMA foreign_keys = 0`); err != nil {
		return err
	}
	for done := false; !done && err == nil; {
		done, err = nextStep(ctx, conn, steps)
	}
	_, restore := conn.ExecContext(context.WithoutCancel(ctx), fmt.Sprintf(`PRAGMA foreign_keys = %d`, keys))
	return errors.Join(err, restore)
}

// nextStep runs one step. The form is read under the lock: another process may
// have made the step in the meantime.
func nextStep(ctx context.Context, conn *sql.Conn, steps []migration) (done bool, err error) {
	if _, err := conn.ExecContext(ctx, `BEGIN EXCLUSIVE`); err != nil {
		return false, err
	}
	defer func() {
		if err != nil || done {
			// Also after a cancelled context. An error leaves the connection
			// without a transaction in some cases, then there is nothing to undo.
			_, _ = conn.ExecContext(context.WithoutCancel(ctx), `ROLLBACK`)
		}
	}()
	var version, application, tables int
	if err := conn.QueryRowContext(ctx,
		`SELECT user_version, application_id, (SELECT count(*) FROM sqlite_schema) FROM pragma_user_version, pragma_application_id`,
	).Scan(&version, &application, &tables); err != nil {
		return false, err
	}
	if application != applicationID && (application != 0 || version != 0 || tables != 0) {
		return false, ErrNotOurs
	}
	if version >= len(steps) {
		return true, nil
	}
	step := steps[version]
	if _, err := conn.ExecContext(ctx, step.sql); err != nil {
		return false, fmt.Errorf("%s: %w", step.name, err)
	}
	if err := checkReferences(ctx, conn); err != nil {
		return false, fmt.Errorf("%s: %w", step.name, err)
	}
	if _, err := conn.ExecContext(ctx, fmt.Sprintf(
		`PRAGMA application_id = %d; PRAGMA user_version = %d`, applicationID, version+1)); err != nil {
		return false, err
	}
	_, err = conn.ExecContext(ctx, `COMMIT`)
	return false, err
}

// checkReferences fails when a row refers to one that is not there.
func checkReferences(ctx context.Context, conn *sql.Conn) error {
	var table string
	err := conn.QueryRowContext(ctx, `SELECT "table" FROM pragma_foreign_key_check LIMIT 1`).Scan(&table)
	if errors.Is(err, sql.ErrNoRows) {
		return nil
	}
	if err != nil {
		return err
	}
	return fmt.Errorf("%w: table %s refers to a row that is not there", ErrCorrupt, table)
}
