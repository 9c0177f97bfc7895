package record

import (
	"context"
	"database/sql"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"time"

	_ "modernc.org/sqlite" // the driver

	"lotgate/limits"
)

// DatabaseFile is the store's file in its folder.
const DatabaseFile = "lotgate.db"

// schemaVersion counts changes of the tables.
const schemaVersion = 1

const schema = `
CREATE TABLE IF NOT EXISTS lots (
	id TEXT PRIMARY KEY, name TEXT NOT NULL UNIQUE, opened TEXT NOT NULL) WITHOUT ROWID;
CREATE TABLE IF NOT EXISTS attempts (
	id TEXT PRIMARY KEY, lot TEXT NOT NULL, serial TEXT NOT NULL, number INTEGER NOT NULL,
	started TEXT NOT NULL, ended TEXT NOT NULL, station TEXT NOT NULL, nest TEXT NOT NULL, operator TEXT NOT NULL,
	verdict TEXT NOT NULL, reason TEXT NOT NULL, whole TEXT NOT NULL,
	UNIQUE (lot, serial, number)) WITHOUT ROWID;
CREATE INDEX IF NOT EXISTS attempts_by_time ON attempts (lot, started);
CREATE TABLE IF NOT EXISTS readings (
	attempt TEXT NOT NULL REFERENCES attempts (id), name TEXT NOT NULL, unit TEXT NOT NULL,
	value REAL, expanded REAL, lower REAL, upper REAL, verdict TEXT NOT NULL, PRIMARY KEY (attempt, name)) WITHOUT ROWID;
CREATE TABLE IF NOT EXISTS files (sha256 TEXT PRIMARY KEY, content BLOB NOT NULL) WITHOUT ROWID;
`

// Store keeps attempts in SQLite (write-ahead log, every commit synced).
type Store struct {
	dir string
	db  *sql.DB
}

// Open opens the store in a folder, making both where they do not exist.
func Open(ctx context.Context, dir string) (*Store, error) {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, fmt.Errorf("the store's folder cannot be made: %w: correct store: in the station file, or the folder's rights", err)
	}
	path := filepath.Join(dir, DatabaseFile)
	dsn := "file:" + filepath.ToSlash(path) + "?_pragma=busy_timeout(5000)&_pragma=journal_mode(WAL)&_pragma=synchronous(FULL)&_pragma=foreign_keys(1)&_txlock=immediate"
	db, err := sql.Open("sqlite", dsn)
	if err != nil {
		return nil, storeError(path, err)
	}
	db.SetMaxOpenConns(1)
	s := &Store{dir: dir, db: db}
	if err := s.prepare(ctx); err != nil {
		db.Close()
		return nil, storeError(path, err)
	}
	return s, nil
}

// storeError says what to do about the usual troubles.
func storeError(path string, err error) error {
	text, action := err.Error(), "check the folder's rights and the space left"
	switch {
	case strings.Contains(text, "not a database"):
		action = "this file is no store: move it away, or name another folder in the station file"
	case strings.Contains(text, "locked") || strings.Contains(text, "BUSY"):
		action = "another process holds the store: end it, or wait"
	case strings.Contains(text, "readonly") || strings.Contains(text, "READONLY"):
		action = "the store may only be read: correct the rights of the file and its folder"
	case strings.Contains(text, "disk is full") || strings.Contains(text, "FULL"):
		action = "the disk is full: make room, nothing was changed"
	case strings.Contains(text, "version"):
		action = "use the newer program, or another store"
	}
	return fmt.Errorf("store %s: %w: %s", path, err, action)
}

func (s *Store) prepare(ctx context.Context) error {
	var version int
	if err := s.db.QueryRowContext(ctx, "PRAGMA user_version").Scan(&version); err != nil {
		return err
	}
	if version > schemaVersion {
		return fmt.Errorf("it has version %d and this program knows version %d", version, schemaVersion)
	}
	if version == schemaVersion {
		return nil
	}
	_, err := s.db.ExecContext(ctx, "BEGIN IMMEDIATE;"+schema+fmt.Sprintf("PRAGMA user_version=%d; COMMIT;", schemaVersion))
	return err
}

// Close closes the store.
func (s *Store) Close() error { return s.db.Close() }

// Dir is the store's folder.
func (s *Store) Dir() string { return s.dir }

// Save keeps an attempt whole in one transaction, gives it its number within unit and lot, and
// returns when it is synced to disk. What exists is never changed.
func (s *Store) Save(ctx context.Context, a *Attempt) (err error) {
	path := filepath.Join(s.dir, DatabaseFile)
	tx, err := s.db.BeginTx(ctx, nil)
	if err != nil {
		return storeError(path, err)
	}
	defer func() {
		if err != nil {
			err = errors.Join(storeError(path, err), ignoreDone(tx.Rollback()))
		}
	}()
	if err := tx.QueryRowContext(ctx, "SELECT COALESCE(MAX(number), 0) + 1 FROM attempts WHERE lot = ? AND serial = ?", a.Lot, a.Serial).Scan(&a.Number); err != nil {
		return err
	}
	whole, err := wholeOf(a)
	if err != nil {
		return err
	}
	started, ended := a.Started.UTC().Format(time.RFC3339Nano), a.Ended.UTC().Format(time.RFC3339Nano)
	if _, err := tx.ExecContext(ctx, "INSERT INTO lots VALUES (?, ?, ?) ON CONFLICT (name) DO NOTHING", NewID(), a.Lot, started); err != nil {
		return err
	}
	if _, err := tx.ExecContext(ctx, "INSERT INTO attempts VALUES (?,?,?,?,?,?,?,?,?,?,?,?)", a.ID, a.Lot, a.Serial, a.Number,
		started, ended, a.Station, a.Nest, a.Operator, string(a.Verdict), a.Reason, whole); err != nil {
		return err
	}
	for _, f := range a.Files {
		if _, err := tx.ExecContext(ctx, "INSERT INTO files VALUES (?, ?) ON CONFLICT (sha256) DO NOTHING", f.SHA256, f.Content); err != nil {
			return err
		}
	}
	for _, r := range a.Readings {
		var value, expanded any
		if r.Void == nil && r.Missing == "" && !r.Curve {
			value, expanded = r.Value, r.Budget.Expanded
		}
		if _, err := tx.ExecContext(ctx, "INSERT INTO readings VALUES (?,?,?,?,?,?,?,?)", a.ID, r.Name, r.Unit, value, expanded, r.Lower, r.Upper, string(r.Verdict)); err != nil {
			return err
		}
	}
	return tx.Commit()
}

func ignoreDone(err error) error {
	if errors.Is(err, sql.ErrTxDone) {
		return nil
	}
	return err
}

// wholeOf is the attempt as JSON, without the files' contents, which are kept once each.
func wholeOf(a *Attempt) (string, error) {
	b := *a
	b.Files = append([]SourceFile(nil), a.Files...)
	for i := range b.Files {
		b.Files[i].Content = nil
	}
	data, err := json.Marshal(&b)
	return string(data), err
}

// Filter chooses attempts; empty fields choose all.
type Filter struct {
	ID, Lot, Serial string
}

// Attempts gives the attempts a filter chooses, in the order they were started, to yield
// until it returns false.
func (s *Store) Attempts(ctx context.Context, f Filter, yield func(*Attempt) bool) error {
	rows, err := s.db.QueryContext(ctx, `SELECT whole FROM attempts WHERE (? = '' OR id = ?) AND (? = '' OR lot = ?) AND (? = '' OR serial = ?) ORDER BY started, id`,
		f.ID, f.ID, f.Lot, f.Lot, f.Serial, f.Serial)
	if err != nil {
		return storeError(filepath.Join(s.dir, DatabaseFile), err)
	}
	defer rows.Close()
	for rows.Next() {
		var whole string
		if err := rows.Scan(&whole); err != nil {
			return err
		}
		var a Attempt
		if err := json.Unmarshal([]byte(whole), &a); err != nil {
			return fmt.Errorf("store %s: an attempt is damaged: %w: restore the file from its copy", s.dir, err)
		}
		if !yield(&a) {
			break
		}
	}
	return rows.Err()
}

// Content is the content of a source file by its SHA-256.
func (s *Store) Content(ctx context.Context, sha256 string) ([]byte, error) {
	var data []byte
	err := s.db.QueryRowContext(ctx, "SELECT content FROM files WHERE sha256 = ?", sha256).Scan(&data)
	if errors.Is(err, sql.ErrNoRows) {
		return nil, fmt.Errorf("store %s: no file with the hash %s is kept", s.dir, sha256)
	}
	return data, err
}

// Yield is a lot in numbers. Void attempts never count in yield.
type Yield struct {
	Units       int // units with at least one attempt
	Valid       int // units with at least one valid attempt
	FirstPass   int // of these, passed at their first valid attempt
	Passed      int // final verdicts
	Marginal    int
	Failed      int
	NeverValid  int // units of which no attempt was valid
	VoidRuns    int // void attempts
	Attempts    int
	FailReasons map[string]int // units finally failed, by the first reading that failed
}

// Yield counts a lot.
func (s *Store) Yield(ctx context.Context, lot string) (Yield, error) {
	type state struct{ first, last limits.Verdict }
	units := map[string]*state{}
	reasons := map[string]string{}
	y := Yield{FailReasons: map[string]int{}}
	err := s.Attempts(ctx, Filter{Lot: lot}, func(a *Attempt) bool {
		y.Attempts++
		u := units[a.Serial]
		if u == nil {
			u = &state{}
			units[a.Serial] = u
		}
		if a.Verdict == limits.Void {
			y.VoidRuns++
			return true
		}
		if u.first == "" {
			u.first = a.Verdict
		}
		u.last = a.Verdict
		reasons[a.Serial] = failing(a)
		return true
	})
	for serial, u := range units {
		y.Units++
		switch u.last {
		case limits.Pass:
			y.Passed++
		case limits.Marginal:
			y.Marginal++
		case limits.Fail:
			y.Failed++
			y.FailReasons[reasons[serial]]++
		default:
			y.NeverValid++
			continue
		}
		y.Valid++
		if u.first == limits.Pass {
			y.FirstPass++
		}
	}
	return y, err
}

// failing names the first reading that made an attempt fail.
func failing(a *Attempt) string {
	for _, want := range []limits.Verdict{limits.Fail, limits.Marginal} {
		for _, r := range a.Readings {
			if r.Verdict == want {
				return r.Name
			}
		}
	}
	return "other"
}
