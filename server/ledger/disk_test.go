package ledger

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"lapgate/pipeline"
)

func TestFullDiskRefusesAndTheLedgerStaysWhole(t *testing.T) {
	ctx := context.Background()
	s := openAt(t, filepath.Join(t.TempDir(), "ledger.db"))
	mustRecord(t, s, disc("first", 1, pipeline.Accept, noon))
	var pages int
	if err := s.writer.QueryRow("PRAGMA page_count").Scan(&pages); err != nil {
		t.Fatal(err)
	}
	if _, err := s.writer.Exec(fmt.Sprintf("PRAGMA max_page_count = %d", pages+20)); err != nil {
		t.Fatal(err)
	}
	kept := 1
	var err error
	for i := 0; err == nil && i < 1000; i++ {
		if _, _, err = s.Record(ctx, disc(fmt.Sprint(i), 1, pipeline.Accept, noon)); err == nil {
			kept++
		}
	}
	wantKind(t, err, pipeline.Exhausted)
	if !strings.Contains(err.Error(), "free disk space") || kept < 2 {
		t.Errorf("after %d records: %v", kept, err)
	}
	if n := rowsIn(t, s, "inspections"); n != kept {
		t.Errorf("%d inspections, want %d", n, kept)
	}
	checkWhole(t, s)
	if _, err := s.writer.Exec("PRAGMA max_page_count = 1000000"); err != nil {
		t.Fatal(err)
	}
	mustRecord(t, s, disc("room-again", 1, pipeline.Accept, noon))
}

// What a read-only file system answers is SQLITE_READONLY, as here.
func TestReadOnlyLedgerSaysSo(t *testing.T) {
	ctx := context.Background()
	s := openAt(t, filepath.Join(t.TempDir(), "ledger.db"))
	if _, err := s.writer.Exec("PRAGMA query_only = 1"); err != nil {
		t.Fatal(err)
	}
	_, _, err := s.Record(ctx, disc("0001", 1, pipeline.Accept, noon))
	wantKind(t, err, pipeline.Unready)
	if !strings.Contains(err.Error(), "cannot be written") {
		t.Error(err)
	}
}

func TestOpenRefusesWhatIsNoLedger(t *testing.T) {
	ctx := context.Background()
	dir := t.TempDir()
	text := filepath.Join(dir, "text")
	if err := os.WriteFile(text, []byte(strings.Repeat("not a database. ", 100)), 0o644); err != nil {
		t.Fatal(err)
	}
	for dsn, want := range map[string]string{
		text:                                "damaged or no ledger",
		filepath.Join(dir, "none", "at.db"): "cannot be written",
		":memory:":                          "path of a file",
		"postgres:///x?host=" + dir:         "does not answer",
	} {
		if s, err := Open(ctx, dsn); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: got %v, want %q", dsn, err, want)
			if s != nil {
				s.Close()
			}
		}
	}
}

func TestANewerSchemaIsRefusedAndLeftAlone(t *testing.T) {
	for engine, dsn := range map[string]func(*testing.T) string{
		"sqlite":     func(t *testing.T) string { return filepath.Join(t.TempDir(), "a b?#%.db") },
		"postgresql": func(t *testing.T) string { return server.database(t) },
	} {
		t.Run(engine, func(t *testing.T) {
			path := dsn(t)
			s := openAt(t, path)
			openAt(t, path) // once more, with nothing to migrate
			if _, err := s.writer.Exec(`INSERT INTO goose_db_version (version_id, is_applied) VALUES (99, $1)`, true); err != nil {
				t.Fatal(err)
			}
			_, err := Open(context.Background(), path)
			wantKind(t, err, pipeline.Unready)
			if !strings.Contains(err.Error(), "version 99") || !strings.Contains(err.Error(), "newer program") {
				t.Error(err)
			}
		})
	}
}

func TestSettingsOfEverySQLiteConnection(t *testing.T) {
	s := openAt(t, filepath.Join(t.TempDir(), "ledger.db"))
	for pragma, want := range map[string]string{"journal_mode": "wal", "synchronous": "2", "foreign_keys": "1", "busy_timeout": "5000"} {
		var got string
		if err := s.writer.QueryRow("PRAGMA " + pragma).Scan(&got); err != nil || got != want {
			t.Errorf("%s: got %s, %v, want %s (2 = FULL)", pragma, got, err, want)
		}
	}
	if _, err := s.reader.Exec("DELETE FROM inspections"); err == nil {
		t.Error("a reader could write")
	}
}
