package store

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"io/fs"
	"net/url"
	"os"
	"path/filepath"
)

// create makes the file and its folder. The store is made with a rollback
// journal, so that a file of ours has our mark from its first page on, and so
// that a half-made one is an empty one.
func (db *DB) create(ctx context.Context, steps []migration) error {
	if err := db.makeFolder(filepath.Dir(db.path)); err != nil {
		return readOnlyIfDenied(err)
	}
	if err := db.makeFile(); err != nil {
		return readOnlyIfDenied(err)
	}
	if _, err := db.look(); err != nil {
		return err
	}
	maker, err := sql.Open("sqlite", dsn(db.path, db.options(url.Values{"_pragma": {
		pageSizePragma, "synchronous(FULL)"}})))
	if err != nil {
		return err
	}
	maker.SetMaxOpenConns(1)
	err = migrate(ctx, maker, steps)
	return errors.Join(err, maker.Close())
}

// makeFile makes an empty file, unless one is there: an empty one, or that of a
// process that makes the store just now.
func (db *DB) makeFile() error {
	opened.Lock()
	defer opened.Unlock()
	f, err := os.OpenFile(db.path, os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o644)
	if errors.Is(err, fs.ErrExist) {
		return nil
	}
	if err != nil {
		return err
	}
	db.created = true
	return f.Close()
}

// makeFolder makes the folder with its parents and notes which ones it made.
func (db *DB) makeFolder(folder string) error {
	if _, err := os.Stat(folder); err == nil || !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	if parent := filepath.Dir(folder); parent != folder {
		if err := db.makeFolder(parent); err != nil {
			return err
		}
	}
	if err := os.Mkdir(folder, 0o755); err != nil && !errors.Is(err, fs.ErrExist) {
		return err
	}
	db.made = append(db.made, folder)
	return nil
}

// readOnlyIfDenied says of a folder that may not be written what it means here.
func readOnlyIfDenied(err error) error {
	if errors.Is(err, fs.ErrPermission) {
		return fmt.Errorf("%w: %w", ErrReadOnly, err)
	}
	return err
}

// removeUnmade removes the file that Open made if it is still empty: another
// process may have made it a store in the meantime.
func (db *DB) removeUnmade() error {
	info, err := os.Stat(db.path)
	if !db.created || err != nil || info.Size() > 0 {
		return nil
	}
	return db.remove()
}

// rowsKept counts the rows that others hang on: 0 in a store in which nothing
// was kept yet.
const rowsKept = `SELECT (SELECT count(*) FROM lot) + (SELECT count(*) FROM part) + (SELECT count(*) FROM session)
	+ (SELECT count(*) FROM bench) + (SELECT count(*) FROM column_map)`

// RemoveIfEmpty closes the store and removes its file, with the folders that
// Open made for it, if Open made the file and nothing was kept in it since. It
// reports whether it did. A store with anything in it, or one that was there
// before, is only closed.
func (db *DB) RemoveIfEmpty(ctx context.Context) (removed bool, err error) {
	if !db.created {
		return false, db.Close()
	}
	// The lock keeps others from writing until the file has no name; what they
	// do then fails, see stillThere.
	err = db.Update(ctx, func(tx *Tx) error {
		n, err := one(tx, "lots and parts", func(r row) (n int, err error) {
			err = r.Scan(&n)
			return n, err
		}, rowsKept)
		if err != nil || n > 0 {
			return err
		}
		removed = true
		// Windows does not remove an open file. There the removal below
		// fails in turn while another process has it open.
		_ = os.Remove(db.path)
		return nil
	})
	err = errors.Join(err, db.Close())
	if removed && err == nil {
		err = wrap(db.path, db.remove())
	}
	return removed, err
}

// remove removes the file, what SQLite left beside it, and the folders that
// Open made, as far as they are empty.
func (db *DB) remove() error {
	err := removeStore(db.path)
	for i := len(db.made) - 1; i >= 0; i-- {
		if os.Remove(db.made[i]) != nil { // something else is in it
			break
		}
	}
	return err
}

func removeStore(path string) error {
	var errs []error
	for _, suffix := range []string{"", "-wal", "-shm", "-journal"} {
		if err := os.Remove(path + suffix); err != nil && !errors.Is(err, fs.ErrNotExist) {
			errs = append(errs, err)
		}
	}
	return errors.Join(errs...)
}
