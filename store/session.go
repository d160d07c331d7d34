package store

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"

	"gatesill/store/record"
)

const selectSession = `SELECT id, name, bench, bench_id, operator, fixture, ambient_c, started_at, note FROM session `

func scanSession(r row) (s record.Session, err error) {
	err = r.Scan(&s.ID, &s.Name, &s.Bench, maybe{&s.BenchID}, &s.Operator, &s.Fixture, &s.Ambient, stamp{&s.StartedAt}, &s.Note)
	return s, err
}

// AddSession adds a session and fills its ID.
func (tx *Tx) AddSession(s *record.Session) error {
	if err := s.Validate(); err != nil {
		return err
	}
	if err := newID(&s.ID); err != nil {
		return err
	}
	return tx.exec(fmt.Sprintf("session %q", s.Name),
		`INSERT INTO session (id, name, bench, bench_id, operator, fixture, ambient_c, started_at, note) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)`,
		s.ID, s.Name, s.Bench, orNull(s.BenchID), s.Operator, s.Fixture, s.Ambient, orNull(s.StartedAt), s.Note)
}

// Session finds a session by its id, or gives [ErrNotFound].
func (tx *Tx) Session(id string) (record.Session, error) {
	return one(tx, "session "+id, scanSession, selectSession+`WHERE id = ?`, id)
}

// Sessions lists the sessions in which devices of a lot were measured, in the
// order in which they were added.
func (tx *Tx) Sessions(lotID string) ([]record.Session, error) {
	return all(tx, "sessions of lot "+lotID, scanSession, selectSession+`WHERE id IN (
			SELECT sweep.session_id FROM sweep JOIN device ON device.id = sweep.device_id WHERE device.lot_id = ?)
		ORDER BY id`, lotID)
}

const selectSource = `SELECT id, lot_id, name, hash, size, layout, dialect, imported_at FROM source `

func scanSource(r row) (s record.Source, err error) {
	err = r.Scan(&s.ID, &s.LotID, &s.Name, &s.Hash, &s.Size, &s.Layout, &s.Dialect, stamp{&s.ImportedAt})
	return s, err
}

// AddSource adds a source and fills its ID, and ImportedAt where it is empty.
func (tx *Tx) AddSource(s *record.Source) error {
	if err := newID(&s.ID); err != nil {
		return err
	}
	if s.ImportedAt == "" {
		s.ImportedAt = record.Now()
	}
	noun := fmt.Sprintf("source %q", s.Name)
	if err := record.CheckStamp("time of import", s.ImportedAt); err != nil {
		return fmt.Errorf("%s: %w", noun, err)
	}
	return tx.exec(noun, `INSERT INTO source (id, lot_id, name, hash, size, layout, dialect, imported_at) VALUES (?, ?, ?, ?, ?, ?, ?, ?)`,
		s.ID, s.LotID, s.Name, s.Hash, s.Size, s.Layout, s.Dialect, s.ImportedAt)
}

// SourceByHash finds the first source of a lot with that hash of its bytes, or
// gives [ErrNotFound].
func (tx *Tx) SourceByHash(lotID, hash string) (record.Source, error) {
	return one(tx, "source "+hash, scanSource, selectSource+`WHERE lot_id = ? AND hash = ? ORDER BY id LIMIT 1`, lotID, hash)
}

// Sources lists the sources of a lot in the order in which they were added.
func (tx *Tx) Sources(lotID string) ([]record.Source, error) {
	return all(tx, "sources of lot "+lotID, scanSource, selectSource+`WHERE lot_id = ? ORDER BY id`, lotID)
}

// AddBench keeps the text of a bench file as it was used and gives its id; the
// same name and text is kept once.
func (tx *Tx) AddBench(name, text string) (id string, err error) {
	id = contentID(name, text)
	return id, tx.exec(fmt.Sprintf("bench file %q", name),
		`INSERT INTO bench (id, name, text, used_at) VALUES (?, ?, ?, ?) ON CONFLICT (id) DO NOTHING`, id, name, text, record.Now())
}

// Bench gives name and text of a bench file that was used, or [ErrNotFound].
func (tx *Tx) Bench(id string) (name, text string, err error) {
	b, err := one(tx, "bench file "+id, func(r row) (b [2]string, err error) {
		err = r.Scan(&b[0], &b[1])
		return b, err
	}, `SELECT name, text FROM bench WHERE id = ?`, id)
	return b[0], b[1], err
}

// contentID names a row by what it holds: the first 32 hex digits of the
// SHA-256 over its texts, each with its length before it.
func contentID(texts ...string) string {
	h := sha256.New()
	for _, t := range texts {
		fmt.Fprintf(h, "%d:%s", len(t), t)
	}
	return hex.EncodeToString(h.Sum(nil))[:32]
}

// Mapping gives what the columns of files with that header signature were taken
// for, and whether it was settled before.
func (tx *Tx) Mapping(signature string) (map[string]string, bool, error) {
	columns, err := one(tx, "column map", text, `SELECT columns FROM column_map WHERE signature = ?`, signature)
	if errors.Is(err, ErrNotFound) {
		return nil, false, nil
	}
	if err != nil {
		return nil, false, err
	}
	var m map[string]string
	if err := json.Unmarshal([]byte(columns), &m); err != nil {
		return nil, false, wrap(tx.path, fmt.Errorf("%w: column map %q: %w", ErrCorrupt, signature, err))
	}
	return m, true, nil
}

// PutMapping remembers what the columns of files with that header signature
// were taken for, in place of what was settled before.
func (tx *Tx) PutMapping(signature string, columns map[string]string) error {
	b, err := json.Marshal(columns)
	if err != nil {
		return fmt.Errorf("column map %q: %w", signature, err)
	}
	return tx.exec("column map", `INSERT INTO column_map (signature, columns, set_at) VALUES (?, ?, ?)
		ON CONFLICT (signature) DO UPDATE SET columns = excluded.columns, set_at = excluded.set_at`,
		signature, string(b), record.Now())
}
