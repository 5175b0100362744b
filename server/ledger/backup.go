package ledger

import (
	"context"
	"errors"
	"io/fs"
	"os"

	"lapgate/pipeline"
)

// Backup writes a whole and consistent ledger to a new file while this one stays in use,
// and sees it onto the disk. A PostgreSQL ledger is refused: pg_dump copies it.
func (s *Store) Backup(ctx context.Context, path string) error {
	if s.engine.name != sqliteName {
		return pipeline.Invalid("backup: the ledger is a PostgreSQL database: copy it with pg_dump")
	}
	if _, err := os.Stat(path); !errors.Is(err, fs.ErrNotExist) {
		return pipeline.Invalid("backup: %s is there already: name a new file", path)
	}
	if err := s.copyTo(ctx, path); err != nil {
		return s.engine.classify(errors.Join(err, removeIfThere(path)))
	}
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		return err
	}
	return errors.Join(f.Sync(), f.Close())
}

// copyTo runs on a reader, so that records go on meanwhile; for the copy alone it may write.
func (s *Store) copyTo(ctx context.Context, path string) error {
	conn, err := s.reader.Conn(ctx)
	if err != nil {
		return err
	}
	if _, err := conn.ExecContext(ctx, `PRAGMA query_only = 0`); err != nil {
		return errors.Join(err, conn.Close())
	}
	_, err = conn.ExecContext(ctx, `VACUUM INTO $1`, path)
	_, reset := conn.ExecContext(context.WithoutCancel(ctx), `PRAGMA query_only = 1`)
	return errors.Join(err, reset, conn.Close())
}

func removeIfThere(path string) error {
	if err := os.Remove(path); !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return nil
}
