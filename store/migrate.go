package store

import (
	"context"
	"database/sql"
	"fmt"
	"io/fs"
	"log/slog"

	"github.com/pressly/goose/v3"
	"github.com/riverqueue/river/riverdriver/riversqlite"
	"github.com/riverqueue/river/rivermigrate"

	"evenshelf/migrations"
)

// migrate runs our migrations, then River's. Ours never mention River's tables, so the order matters only
// in that a schema of ours from a newer program stops everything before River has touched the file.
func migrate(ctx context.Context, db *sql.DB) error {
	ours, err := ourMigrations(db, migrations.SQLite)
	if err != nil {
		return fmt.Errorf("migrations: %w", err)
	}
	has, knows, err := ours.GetVersions(ctx)
	if err != nil {
		return fmt.Errorf("migrations: %w", err)
	}
	if has > knows {
		return fmt.Errorf("its schema is version %d, this program knows versions up to %d: it was last used by a newer program: %w", has, knows, ErrState)
	}
	if _, err := ours.Up(ctx); err != nil {
		return fmt.Errorf("migrations: %w", err)
	}
	rivers, err := rivermigrate.New(riversqlite.New(db), &rivermigrate.Config{Logger: slog.New(slog.DiscardHandler)})
	if err != nil {
		return fmt.Errorf("queue migrations: %w", err)
	}
	if _, err := rivers.Migrate(ctx, rivermigrate.DirectionUp, nil); err != nil {
		return fmt.Errorf("queue migrations: %w", err)
	}
	return nil
}

func ourMigrations(db *sql.DB, files fs.FS) (*goose.Provider, error) {
	return goose.NewProvider(goose.DialectSQLite3, db, files,
		goose.WithDisableGlobalRegistry(true), goose.WithSlog(slog.New(slog.DiscardHandler)))
}
