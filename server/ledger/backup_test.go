package ledger

import (
	"context"
	"fmt"
	"path/filepath"
	"testing"

	"lapgate/pipeline"
)

func TestABackupIsAWholeLedger(t *testing.T) {
	ctx := context.Background()
	dir := t.TempDir()
	s := openAt(t, filepath.Join(dir, "ledger.db"))
	for i := range 5 {
		mustRecord(t, s, disc(fmt.Sprint(i), 1, pipeline.Accept, noon))
	}
	path := filepath.Join(dir, "it's a copy.db")
	if err := s.Backup(ctx, path); err != nil {
		t.Fatal(err)
	}
	mustRecord(t, s, disc("later", 1, pipeline.Accept, noon))
	b := openAt(t, path)
	checkWhole(t, b)
	if c, err := b.Counts(ctx, Question{}); err != nil || c[0].Showings.Accept != 5 {
		t.Errorf("%+v, %v", c, err)
	}
	wantKind(t, s.Backup(ctx, path), pipeline.InvalidKind)
	wantKind(t, s.Backup(ctx, filepath.Join(dir, "none", "x.db")), pipeline.Unready)
}

func TestPostgreSQLIsCopiedByItsOwnTools(t *testing.T) {
	s := openAt(t, server.database(t))
	wantKind(t, s.Backup(context.Background(), filepath.Join(t.TempDir(), "x")), pipeline.InvalidKind)
}
