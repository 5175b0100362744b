package ledger

import (
	"context"
	"path/filepath"
	"testing"
	"time"

	"lapgate/pipeline"
)

// A ledger of the first schema keeps its records, and counts that it made are made anew.
func TestAnOldLedgerIsBroughtUpToDate(t *testing.T) {
	for _, dsn := range []func() string{func() string { return filepath.Join(t.TempDir(), "ledger.db") }, func() string { return server.database(t) }} {
		path := dsn()
		oldLedger(t, path)
		s := openAt(t, path)
		c, err := s.Counts(context.Background(), Question{})
		if err != nil || len(c) != 1 || c[0].RetestAccepts != (Tally{Hold: 1}) || c[0].Attempts != 2 || c[0].Final.Accept != 1 {
			t.Errorf("%s: got %+v, %v", s.Engine(), c, err)
		}
	}
}

// oldLedger makes a ledger of schema 1 with a retested unit that has been counted.
func oldLedger(t *testing.T, dsn string) {
	t.Helper()
	ctx := context.Background()
	e := sqliteEngine()
	if filepath.Ext(dsn) != ".db" {
		e = postgresEngine()
	}
	w, r, err := e.open(dsn)
	if err != nil {
		t.Fatal(err)
	}
	s := &Store{Now: time.Now, engine: e, writer: w, reader: r}
	defer s.Close()
	p, err := s.migrator()
	if err == nil {
		_, err = p.UpTo(ctx, 1)
	}
	if err != nil {
		t.Fatal(err)
	}
	mustRecord(t, s, disc("1", 1, pipeline.Hold, noon))
	mustRecord(t, s, disc("1", 2, pipeline.Accept, noon.Add(time.Minute)))
	for _, q := range []string{`DELETE FROM dirty_buckets`,
		`INSERT INTO rollup_verdicts (bucket_us, part, surface, process, lot, line, station, recipe, purpose, verdict, showings, first_pass, final, attempts, binned, first_binned)
			SELECT counted_us, part, surface, process, lot, line, station, recipe, purpose, verdict, 1, 1, 1, 1, 0, 0 FROM inspections WHERE attempt = 1`} {
		if _, err := w.Exec(q); err != nil {
			t.Fatal(err)
		}
	}
}
