// Package ledger keeps one record per inspection, for ever, on SQLite or PostgreSQL. It
// judges nothing, keeps no pixels and does no yield arithmetic beyond exact counts.
package ledger

import (
	"context"
	"database/sql"
	"errors"
	"strings"
	"time"
)

// Store is an open ledger. It is safe for concurrent use, also by several servers when
// it stands on PostgreSQL.
type Store struct {
	// Now gives the time of everything the ledger dates itself. Set it before first use.
	Now func() time.Time

	engine engine
	writer *sql.DB
	reader *sql.DB
	// lastCheck is asked several times for each unit; preparing it takes longer than running it.
	lastCheck *sql.Stmt
}

// engine is what differs between databases: how to open one and what its errors mean.
type engine struct {
	name string
	open func(dsn string) (writer, reader *sql.DB, err error)
	// classify gives an error a kind and a sentence saying what to do.
	classify func(error) error
	// again reports whether the transaction failed only because of another one.
	again func(error) bool
}

// Open opens the ledger that dsn names, makes it if there is none, and brings its schema
// up to date. A dsn starting with postgres:// or postgresql:// is a PostgreSQL database;
// anything else is the path of an SQLite file. A schema newer than this program is refused.
func Open(ctx context.Context, dsn string) (*Store, error) {
	e := sqliteEngine()
	if strings.HasPrefix(dsn, "postgres://") || strings.HasPrefix(dsn, "postgresql://") {
		e = postgresEngine()
	}
	w, r, err := e.open(dsn)
	if err != nil {
		return nil, e.classify(err)
	}
	s := &Store{Now: time.Now, engine: e, writer: w, reader: r}
	err = s.migrate(ctx)
	if err == nil {
		s.lastCheck, err = r.PrepareContext(ctx, lastCheckQuery)
	}
	if err != nil {
		return nil, errors.Join(e.classify(err), s.Close())
	}
	return s, nil
}

// Close closes the ledger. What was recorded is on disk already.
func (s *Store) Close() error {
	var err error
	if s.lastCheck != nil {
		err = s.lastCheck.Close()
	}
	return errors.Join(err, s.reader.Close(), s.writer.Close())
}

// Engine returns "sqlite" or "postgresql".
func (s *Store) Engine() string { return s.engine.name }

// maxTries is how often a transaction that lost against another one is run.
const maxTries = 20

// write runs f in one transaction and again when it lost against another transaction,
// so f must have no effect outside it.
func (s *Store) write(ctx context.Context, f func(*sql.Tx) error) error {
	var err error
	for try := range maxTries {
		if err = s.writeOnce(ctx, f); err == nil || !s.engine.again(err) {
			break
		}
		select {
		case <-ctx.Done():
			return ctx.Err()
		case <-time.After(time.Duration(try) * time.Millisecond):
		}
	}
	return s.engine.classify(err)
}

func (s *Store) writeOnce(ctx context.Context, f func(*sql.Tx) error) error {
	tx, err := s.writer.BeginTx(ctx, nil)
	if err != nil {
		return notBegun{err}
	}
	if err := f(tx); err != nil {
		_ = tx.Rollback() // fails where the database has undone it already, as after a full disk
		return err
	}
	return tx.Commit()
}

// notBegun is the error of a transaction that did nothing yet.
type notBegun struct{ error }

func (e notBegun) Unwrap() error { return e.error }

// queryer is a pool or a transaction.
type queryer interface {
	QueryContext(ctx context.Context, query string, args ...any) (*sql.Rows, error)
	QueryRowContext(ctx context.Context, query string, args ...any) *sql.Row
}

// each calls scan for every row of a query.
func each(ctx context.Context, q queryer, scan func(*sql.Rows) error, query string, args ...any) error {
	rows, err := q.QueryContext(ctx, query, args...)
	if err != nil {
		return err
	}
	defer rows.Close()
	for rows.Next() {
		if err := scan(rows); err != nil {
			return err
		}
	}
	return rows.Err()
}

func micros(t time.Time) int64 { return t.UnixMicro() }

func fromMicros(us int64) time.Time { return time.UnixMicro(us).UTC() }

func flag(b bool) int64 {
	if b {
		return 1
	}
	return 0
}
