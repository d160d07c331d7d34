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

	"modernc.org/sqlite"
)

// backupPages is how many pages are copied between two looks at the context.
const backupPages = 256

// Backup copies the store to path as it is at this moment; others may write
// meanwhile. The copy is one plain file, checked before it gets its name. It
// calls progress, if there is one, with the pages copied and their total. An
// existing file is never overwritten: [ErrExists].
func (db *DB) Backup(ctx context.Context, path string, progress func(done, total int)) (err error) {
	path, err = filepath.Abs(path)
	if err != nil {
		return err
	}
	defer func() { err = wrap(path, err) }()
	if _, err := os.Lstat(path); err == nil {
		return ErrExists
	} else if !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.part")
	if err != nil {
		return readOnlyIfDenied(err)
	}
	part := f.Name()
	defer removeStore(part) // gone already when all went well
	if err := f.Close(); err != nil {
		return err
	}
	if err := db.copyTo(ctx, part, progress); err != nil {
		return err
	}
	if err := db.finishCopy(ctx, part); err != nil {
		return err
	}
	return giveName(part, path)
}

// copyTo copies all pages of one snapshot to the file.
func (db *DB) copyTo(ctx context.Context, part string, progress func(done, total int)) error {
	conn, err := db.reads.Conn(ctx)
	if err != nil {
		return err
	}
	defer conn.Close()
	// The open read transaction keeps the snapshot: without it the copy would
	// begin anew whenever another process commits, and never end.
	t, err := conn.BeginTx(ctx, &sql.TxOptions{ReadOnly: true})
	if err != nil {
		return err
	}
	defer t.Rollback()
	if _, err := t.ExecContext(ctx, `SELECT count(*) FROM sqlite_schema`); err != nil {
		return err
	}
	return conn.Raw(func(c any) error {
		b, err := c.(interface {
			NewBackup(string) (*sqlite.Backup, error)
		}).NewBackup(dsn(part, url.Values{}))
		if err != nil {
			return err
		}
		for more := true; more; {
			if err = ctx.Err(); err == nil {
				more, err = b.Step(backupPages)
			}
			if err != nil {
				_ = b.Finish() // it would tell the same again
				return err
			}
			if progress != nil {
				progress(b.PageCount()-b.Remaining(), b.PageCount())
			}
		}
		return b.Finish()
	})
}

// finishCopy makes the copy a single file that can be read where nothing can be
// written, checks all of it and has it written to the disk.
func (db *DB) finishCopy(ctx context.Context, part string) error {
	pool, err := sql.Open("sqlite", dsn(part, url.Values{"_pragma": {"journal_mode(DELETE)", "synchronous(FULL)"}}))
	if err != nil {
		return err
	}
	pool.SetMaxOpenConns(1)
	err = check(ctx, pool)
	if err := errors.Join(err, pool.Close()); err != nil {
		return err
	}
	f, err := os.OpenFile(part, os.O_RDWR, 0)
	if err != nil {
		return err
	}
	return errors.Join(f.Chmod(db.info.Mode().Perm()), f.Sync(), f.Close())
}

// giveName renames the file without overwriting another.
func giveName(from, to string) error {
	err := os.Link(from, to)
	switch {
	case errors.Is(err, fs.ErrExist):
		return ErrExists
	case err != nil: // a file system without links
		if _, err := os.Lstat(to); err == nil {
			return ErrExists
		}
		if err := os.Rename(from, to); err != nil {
			return err
		}
	}
	return syncFolder(filepath.Dir(to))
}

// syncFolder has the names in a folder written to the disk, where the system
// can do that.
func syncFolder(path string) error {
	f, err := os.Open(path)
	if err != nil {
		return nil // Windows opens no folders
	}
	_ = f.Sync() // some file systems refuse it for folders
	return f.Close()
}

// Check reads the whole store and tells the first fault: of the file, or a row
// that refers to one that is not there. It wraps [ErrCorrupt].
func (db *DB) Check(ctx context.Context) error { return wrap(db.path, check(ctx, db.reads)) }

func check(ctx context.Context, pool *sql.DB) error {
	var fault string
	if err := pool.QueryRowContext(ctx, `PRAGMA integrity_check(1)`).Scan(&fault); err != nil {
		return err
	}
	if fault != "ok" {
		return fmt.Errorf("%w: %s", ErrCorrupt, fault)
	}
	conn, err := pool.Conn(ctx)
	if err != nil {
		return err
	}
	defer conn.Close()
	return checkReferences(ctx, conn)
}
