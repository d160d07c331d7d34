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
	"strconv"
	"time"

	sqlite3 "modernc.org/sqlite/lib"
)

// applicationID marks a file as a store of ours in SQLite's header ("GSil").
const applicationID = 0x4753696c

// pageSizePragma suits rows of a few kilobytes, as sweeps are: measured with
// 5,000 sweeps of 200 points, 19 bytes a point against 23 with pages of 4 or 8
// KiB, and less time. It has an effect only on an empty file.
const pageSizePragma = "page_size(16384)"

// Options say how a store is opened.
type Options struct {
	Create   bool          // make the store, and its folder, where there is none
	ReadOnly bool          // change nothing
	Wait     time.Duration // for another writer; 0: 5 s, negative: not at all
	Who      string        // name of the user, for the audit trail
}

// DB is an open store. It may be used by several goroutines at once.
type DB struct {
	path     string
	who      string
	info     os.FileInfo // of the file that was opened
	created  bool
	readOnly bool
	wait     time.Duration
	made     []string // folders that Open made, the outermost first

	reads   *sql.DB
	writes  *sql.DB       // one connection; nil when read-only
	writing chan struct{} // holds a token while nobody in this process writes
}

// Open opens the store at path.
//
// Errors: [ErrNoStore] when there is none and it was not to be made,
// [ErrNotOurs], [ErrNewer], [ErrCorrupt], [ErrReadOnly], [ErrFull], [ErrBusy],
// each as an [*Error] with the path and a hint. A file that is refused is not
// changed. An older store is copied beside itself, then brought up to date. A
// store that cannot be written is opened for reading, as [DB.ReadOnly] tells.
func Open(ctx context.Context, path string, o Options) (*DB, error) {
	return open(ctx, path, o, migrations)
}

func open(ctx context.Context, path string, o Options, steps []migration) (*DB, error) {
	full, err := filepath.Abs(path)
	if err != nil {
		return nil, wrap(path, err)
	}
	db := &DB{path: full, who: o.Who, readOnly: o.ReadOnly, wait: o.Wait, writing: make(chan struct{}, 1)}
	db.writing <- struct{}{}
	if db.wait == 0 {
		db.wait = 5 * time.Second
	}
	if err := db.open(ctx, o.Create && !o.ReadOnly, steps); err != nil {
		return nil, errors.Join(wrap(full, err), db.Close(), db.removeUnmade())
	}
	return db, nil
}

func (db *DB) open(ctx context.Context, create bool, steps []migration) error {
	head, err := db.look()
	switch {
	case errors.Is(err, fs.ErrNotExist) && create:
		if err := db.create(ctx, steps); err != nil {
			return err
		}
	case errors.Is(err, fs.ErrNotExist):
		return ErrNoStore
	case err != nil:
		return err
	case head.empty && create:
		if err := db.create(ctx, steps); err != nil {
			return err
		}
	default:
		if err := head.check(len(steps)); err != nil {
			return err
		}
	}
	if db.info, err = os.Stat(db.path); err != nil {
		return err
	}
	if err := db.patiently(ctx, db.connect); err != nil {
		return err
	}
	return db.upToDate(ctx, steps)
}

// patiently repeats f while another process is in the way. SQLite itself does
// not wait when it turns a new file to its write-ahead log.
func (db *DB) patiently(ctx context.Context, f func(context.Context) error) error {
	for end := time.Now().Add(db.wait); ; {
		err := f(ctx)
		if !errors.Is(named(err), ErrBusy) || time.Now().After(end) {
			return err
		}
		select {
		case <-time.After(2 * time.Millisecond):
		case <-ctx.Done():
			return ctx.Err()
		}
	}
}

// options adds what every connection has to v.
func (db *DB) options(v url.Values) url.Values {
	wait := max(db.wait, 0).Milliseconds()
	v["_pragma"] = append([]string{"busy_timeout(" + strconv.FormatInt(wait, 10) + ")"}, v["_pragma"]...)
	v.Set("_dqs", "0")
	v.Set("_defensive", "1")
	v.Set("_error_rc", "1")
	return v
}

// connect opens the connections of a store that is known to be ours.
func (db *DB) connect(ctx context.Context) error {
	if !db.readOnly {
		err := db.connectWriter(ctx)
		if err == nil {
			return db.connectReaders(ctx, url.Values{"_pragma": {"query_only(1)"}})
		}
		if !cannotWrite(err) {
			return err
		}
		db.readOnly = true
	}
	err := db.connectReaders(ctx, url.Values{"mode": {"ro"}})
	if !cannotWrite(err) {
		return err
	}
	// A folder that cannot be written has no room for the file that readers and
	// writers share. Nobody writes there, so it is not needed, unless a crash
	// left data in the log, which are found only by that file.
	if db.hasLog() {
		return fmt.Errorf("%w: data in its write-ahead log can be read only where the folder can be written: %w", ErrReadOnly, err)
	}
	return db.connectReaders(ctx, url.Values{"mode": {"ro"}, "immutable": {"1"}})
}

// cannotWrite reports whether err may come from a file or a folder that cannot
// be written.
func cannotWrite(err error) bool {
	return errors.Is(err, ErrReadOnly) || isCode(err, sqlite3.SQLITE_READONLY) || isCode(err, sqlite3.SQLITE_CANTOPEN)
}

// hasLog reports whether a write-ahead log with content lies beside the file.
func (db *DB) hasLog() bool {
	info, err := os.Stat(db.path + "-wal")
	return err == nil && info.Size() > 0
}

func (db *DB) connectWriter(ctx context.Context) error {
	if db.writes != nil { // from the attempt before
		return nil
	}
	w, err := sql.Open("sqlite", dsn(db.path, db.options(url.Values{
		"_txlock": {"immediate"},
		"_pragma": {
			pageSizePragma, // of a store whose making was cut short: it is empty
			"journal_mode(WAL)", "synchronous(FULL)", "foreign_keys(1)", "recursive_triggers(1)", "cell_size_check(1)",
			"cache_size(-32000)",           // kB: a large import stays in memory until it is committed
			"journal_size_limit(33554432)", // bytes: what a large import leaves of the log
		}})))
	if err != nil {
		return err
	}
	w.SetMaxOpenConns(1)
	w.SetMaxIdleConns(1)
	err = readable(ctx, w)
	if err == nil {
		var ok bool
		if ok, err = canWrite(ctx, w); err == nil && !ok {
			err = ErrReadOnly
		}
	}
	if err != nil {
		return errors.Join(err, w.Close())
	}
	db.writes = w
	return nil
}

func (db *DB) connectReaders(ctx context.Context, v url.Values) error {
	v["_pragma"] = append(v["_pragma"], "cell_size_check(1)", "cache_size(-16000)")
	r, err := sql.Open("sqlite", dsn(db.path, db.options(v)))
	if err != nil {
		return err
	}
	r.SetMaxIdleConns(4) // more may be open: a view within a view must not wait for itself
	if err := readable(ctx, r); err != nil {
		return errors.Join(err, r.Close())
	}
	db.reads = r
	return nil
}

// readable opens a connection and has the schema read.
func readable(ctx context.Context, pool *sql.DB) error {
	var n int
	return pool.QueryRowContext(ctx, `SELECT count(*) FROM sqlite_schema`).Scan(&n)
}

// canWrite reports whether SQLite got the file for writing; it falls back to
// reading in silence.
func canWrite(ctx context.Context, pool *sql.DB) (bool, error) {
	conn, err := pool.Conn(ctx)
	if err != nil {
		return false, err
	}
	defer conn.Close()
	var readOnly bool
	err = conn.Raw(func(c any) error {
		readOnly, err = c.(interface{ IsReadOnly(string) (bool, error) }).IsReadOnly("main")
		return err
	})
	return !readOnly, err
}

// Close closes the store. Transactions must have ended.
func (db *DB) Close() error {
	var errs []error
	if db.reads != nil {
		errs = append(errs, db.reads.Close())
	}
	if db.writes != nil { // last, so that it empties the write-ahead log into the file
		errs = append(errs, db.writes.Close())
	}
	opened.Lock()
	delete(opened.by, db)
	opened.Unlock()
	return wrap(db.path, errors.Join(errs...))
}

// Path is the absolute path of the file.
func (db *DB) Path() string { return db.path }

// ReadOnly reports whether the store was opened for reading only, by choice or
// because it cannot be written.
func (db *DB) ReadOnly() bool { return db.readOnly }

// CreatedNow reports whether Open made the file.
func (db *DB) CreatedNow() bool { return db.created }
