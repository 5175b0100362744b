package ledger

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"net/url"
	"path/filepath"
	"strings"

	"lapgate/pipeline"

	"modernc.org/sqlite"
	sqlite3 "modernc.org/sqlite/lib"
)

const sqliteName = "sqlite"

// sqliteReaders is how many queries run at once beside the one writer.
const sqliteReaders = 4

func sqliteEngine() engine {
	return engine{name: sqliteName, open: openSQLite, classify: classifySQLite, again: func(error) bool { return false }}
}

// openSQLite opens one writer and a pool of readers. The pragmas stand in the data source
// name, because one sent by Exec would reach a single connection of a pool.
func openSQLite(path string) (writer, reader *sql.DB, err error) {
	path = strings.TrimPrefix(path, "sqlite:")
	if path == "" || strings.Contains(path, ":memory:") {
		return nil, nil, pipeline.Invalid("ledger: got %q, want the path of a file: a ledger is kept for ever", path)
	}
	abs, err := filepath.Abs(path)
	if err != nil {
		return nil, nil, err
	}
	common := []string{"busy_timeout(5000)", "foreign_keys(1)"}
	// FULL, because an answered verdict must survive a power cut.
	writing := append([]string{"journal_mode(WAL)", "synchronous(FULL)"}, common...)
	writer, err = sql.Open("sqlite", sqliteDSN(abs, url.Values{"_pragma": writing, "_txlock": {"immediate"}}))
	if err != nil {
		return nil, nil, err
	}
	writer.SetMaxOpenConns(1)
	// The writer goes first: it makes the file and turns on WAL.
	if err := writer.PingContext(context.Background()); err != nil {
		return nil, nil, errors.Join(fmt.Errorf("%s: %w", path, err), writer.Close())
	}
	reader, err = sql.Open("sqlite", sqliteDSN(abs, url.Values{"_pragma": append(common, "query_only(1)")}))
	if err != nil {
		return nil, nil, errors.Join(err, writer.Close())
	}
	reader.SetMaxOpenConns(sqliteReaders)
	reader.SetMaxIdleConns(sqliteReaders)
	return writer, reader, nil
}

func sqliteDSN(path string, query url.Values) string {
	return (&url.URL{Scheme: "file", Path: filepath.ToSlash(path), RawQuery: query.Encode()}).String()
}

// classifySQLite knows the result codes of sqlite.org/rescode.html.
func classifySQLite(err error) error {
	var e *sqlite.Error
	if !errors.As(err, &e) {
		return err
	}
	switch e.Code() & 0xff { // the low byte is the primary result code
	case sqlite3.SQLITE_FULL:
		return pipeline.Fail(pipeline.Exhausted, "ledger: no room to write (%w); nothing of this was recorded: free disk space and send it again", err)
	case sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED:
		return pipeline.Fail(pipeline.Exhausted, "ledger: another program holds it (%w): one server at a time may use an SQLite ledger", err)
	case sqlite3.SQLITE_READONLY, sqlite3.SQLITE_PERM, sqlite3.SQLITE_AUTH, sqlite3.SQLITE_CANTOPEN:
		return pipeline.Fail(pipeline.Unready, "ledger: cannot be written (%w): check that file and folder exist and may be written by this user", err)
	case sqlite3.SQLITE_IOERR:
		return pipeline.Fail(pipeline.Unready, "ledger: the disk failed (%w): nothing of this was recorded", err)
	case sqlite3.SQLITE_CORRUPT, sqlite3.SQLITE_NOTADB:
		return pipeline.Fail(pipeline.Unready, "ledger: the file is damaged or no ledger (%w): put it aside and restore the last copy", err)
	}
	return err
}
