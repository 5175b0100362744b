package ledger

import (
	"context"
	"embed"
	"io/fs"

	"lapgate/pipeline"

	"github.com/pressly/goose/v3"
	"github.com/pressly/goose/v3/lock"
)

//go:embed migrations/*.sql
var migrations embed.FS

func (s *Store) migrate(ctx context.Context) error {
	p, err := s.migrator()
	if err != nil {
		return err
	}
	have, want, err := p.GetVersions(ctx)
	if err != nil {
		return err
	}
	if have > want {
		return pipeline.Fail(pipeline.Unready,
			"ledger: its schema is version %d, this program knows up to %d: run the newer program, or name another ledger", have, want)
	}
	if have == want {
		return nil
	}
	_, err = p.Up(ctx)
	return err
}

func (s *Store) migrator() (*goose.Provider, error) {
	files, err := fs.Sub(migrations, "migrations")
	if err != nil {
		return nil, err
	}
	options := []goose.ProviderOption{goose.WithDisableGlobalRegistry(true)}
	dialect := goose.DialectSQLite3
	if s.engine.name == postgresName {
		dialect = goose.DialectPostgres
		// A lock kept in a table: several servers may start at once, and not every
		// PostgreSQL-wire database has advisory locks.
		locker, err := lock.NewPostgresTableLocker()
		if err != nil {
			return nil, err
		}
		options = append(options, goose.WithLocker(locker))
	}
	return goose.NewProvider(dialect, s.writer, files, options...)
}
