// Package store keeps shelves, recordings, readings, runs, jobs and history in SQLite. It is the only
// room with SQL.
//
// Two pools reach one file. The writer has exactly one connection, because SQLite has one writer at a
// time and waiting in Go is fairer and cheaper than waiting in SQLite; the queue (River) shares it, so that a job
// and the rows it belongs to commit together. Readers have several connections that cannot write; each
// read sees one snapshot and never waits for the writer (write-ahead log).
//
// Rules that hold everywhere in this package:
//
//   - An exported method owns its transaction; unexported helpers take it as an argument. No transaction
//     spans anything slow.
//   - History is written in the transaction that makes it true, and its ids only grow, so a follower that
//     asks for "after the last id I saw" misses nothing and sees nothing twice.
//   - Changed() is signalled after the commit, never before: who wakes up finds what woke it.
//   - An error says what was being done and wraps ErrNotFound, ErrExists, ErrState or ErrInvalid where one fits.
package store

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"os"
	"sync"
	"time"
)

// ErrInvalid is wrapped when what was asked for does not make sense: a bad name, cursor, folder or profile.
var ErrInvalid = errors.New("not valid")

// ErrFormat is an ErrInvalid: files in the format that a run asks for could not go where it puts them.
var ErrFormat = fmt.Errorf("the format is %w", ErrInvalid)

// Options says where the database is.
type Options struct {
	Path string // of the SQLite file; its folder is made
}

// Store is an open database. Its methods may be called from many goroutines.
type Store struct {
	writer *sql.DB
	reader *sql.DB
	lock   *os.File

	mu      sync.Mutex
	changed chan struct{}
}

// Writer is the pool of one connection that the queue shares with the store. Whoever holds a
// transaction on it must not call a method of Store that writes: it would wait for itself.
func (s *Store) Writer() *DB { return s.writer }

// Changed returns a channel that is closed at the next commit that changes anything a person can see.
// Take the channel before reading what it guards, or a change in between goes unnoticed.
func (s *Store) Changed() <-chan struct{} {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.changed
}

func (s *Store) signal() {
	s.mu.Lock()
	defer s.mu.Unlock()
	close(s.changed)
	s.changed = make(chan struct{})
}

// Close closes both pools and gives up the lock. Stop the queue first.
func (s *Store) Close() error {
	return errors.Join(s.reader.Close(), s.writer.Close(), s.lock.Close())
}

// write runs fn in a transaction on the writer and signals the change once it is committed.
func (s *Store) write(ctx context.Context, fn func(*sql.Tx) error) error {
	tx, err := s.writer.BeginTx(ctx, nil)
	if err != nil {
		return fmt.Errorf("begin: %w", err)
	}
	defer tx.Rollback() // no effect after a commit; also covers a panic in fn
	if err := fn(tx); err != nil {
		return err
	}
	if err := tx.Commit(); err != nil {
		return fmt.Errorf("commit: %w", err)
	}
	s.signal()
	return nil
}

// read runs fn on one snapshot of the database.
func (s *Store) read(ctx context.Context, fn func(*sql.Tx) error) error {
	tx, err := s.reader.BeginTx(ctx, &sql.TxOptions{ReadOnly: true})
	if err != nil {
		return fmt.Errorf("begin: %w", err)
	}
	defer tx.Rollback()
	return fn(tx)
}

// collect runs a query and scans every row with scan.
func collect[T any](ctx context.Context, tx *sql.Tx, scan func(scanner) (T, error), query string, args ...any) ([]T, error) {
	rows, err := tx.QueryContext(ctx, query, args...)
	if err != nil {
		return nil, err
	}
	defer rows.Close()
	list := []T{} // an empty list is [] in JSON, not null
	for rows.Next() {
		v, err := scan(rows)
		if err != nil {
			return nil, err
		}
		list = append(list, v)
	}
	return list, rows.Err()
}

// one runs a query for a single row; what names the thing for the error when there is none.
func one[T any](ctx context.Context, tx *sql.Tx, scan func(scanner) (T, error), what string, query string, args ...any) (T, error) {
	v, err := scan(tx.QueryRowContext(ctx, query, args...))
	if errors.Is(err, sql.ErrNoRows) {
		return v, fmt.Errorf("%s: %w", what, ErrNotFound)
	}
	if err != nil {
		return v, fmt.Errorf("%s: %w", what, err)
	}
	return v, nil
}

// scanner is a *sql.Row or *sql.Rows.
type scanner interface{ Scan(dest ...any) error }

// scanID reads a row of one integer.
func scanID(row scanner) (id int64, err error) { return id, row.Scan(&id) }

func fromMillis(ms int64) time.Time { return time.UnixMilli(ms).UTC() }

func fromNullMillis(ms sql.NullInt64) *time.Time {
	if !ms.Valid {
		return nil
	}
	t := fromMillis(ms.Int64)
	return &t
}

func now() int64 { return time.Now().UnixMilli() }
