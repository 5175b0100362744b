package ledger

import (
	"context"
	"database/sql"
	"database/sql/driver"
	"errors"
	"io"
	"net"
	"slices"
	"strings"

	"lapgate/pipeline"

	"github.com/jackc/pgx/v5/pgconn"
	_ "github.com/jackc/pgx/v5/stdlib" // the "pgx" driver of database/sql
)

const postgresName = "postgresql"

// postgresConnections is how many connections one server opens at most.
const postgresConnections = 8

func postgresEngine() engine {
	return engine{name: postgresName, open: openPostgres, classify: classifyPostgres, again: againPostgres}
}

func openPostgres(dsn string) (writer, reader *sql.DB, err error) {
	writer, err = sql.Open("pgx", dsn)
	if err != nil {
		return nil, nil, pipeline.Invalid("ledger: %w: want postgres://user@host/database", err)
	}
	reader, err = sql.Open("pgx", dsn)
	if err != nil {
		return nil, nil, errors.Join(err, writer.Close())
	}
	for _, db := range []*sql.DB{writer, reader} {
		db.SetMaxOpenConns(postgresConnections)
		db.SetMaxIdleConns(postgresConnections)
	}
	return writer, reader, nil
}

// againPostgres knows the codes of PostgreSQL's appendix A: 40001 serialization_failure,
// 40P01 deadlock_detected, and 23505 unique_violation, which is another server having
// inserted the same key since this one looked. A pooled connection that turns out to be
// dead before anything was done on it is replaced by another.
func againPostgres(err error) bool {
	var begun notBegun
	if errors.As(err, &begun) && lost(err) {
		return true
	}
	var e *pgconn.PgError
	return errors.As(err, &e) && slices.Contains([]string{"40001", "40P01", "23505"}, e.Code)
}

func classifyPostgres(err error) error {
	var refused *pgconn.ConnectError
	if errors.As(err, &refused) {
		return pipeline.Fail(pipeline.Unready, "ledger: PostgreSQL does not answer (%w): check that it runs and the address is right", err)
	}
	if lost(err) {
		return pipeline.Fail(pipeline.Unready, "ledger: PostgreSQL went away (%w): send it again", err)
	}
	var e *pgconn.PgError
	if !errors.As(err, &e) {
		return err
	}
	switch {
	case strings.HasPrefix(e.Code, "53"): // insufficient_resources; 53100 is disk_full
		return pipeline.Fail(pipeline.Exhausted, "ledger: no room to write (%w); nothing of this was recorded: free disk space and send it again", err)
	case e.Code == "25006": // read_only_sql_transaction
		return pipeline.Fail(pipeline.Unready, "ledger: PostgreSQL is read-only (%w): name the primary", err)
	case againPostgres(err):
		return pipeline.Fail(pipeline.Exhausted, "ledger: other writers were faster %d times (%w): send it again", maxTries, err)
	}
	return err
}

// lost reports whether the connection broke: classes 57 (operator intervention) and 08
// (connection exception), and what the network says.
func lost(err error) bool {
	var e *pgconn.PgError
	if errors.As(err, &e) {
		return strings.HasPrefix(e.Code, "57P") || strings.HasPrefix(e.Code, "08")
	}
	var network net.Error
	return errors.As(err, &network) && !errors.Is(err, context.DeadlineExceeded) ||
		errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) || errors.Is(err, driver.ErrBadConn)
}
