package db

import (
	"context"
	"fmt"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/stdlib"
	"github.com/pressly/goose/v3"
	"github.com/pressly/goose/v3/lock"

	"epitally/migrations"
)

// Migrate brings the database to this binary's schema. Two servers that start
// together wait for one another on an advisory lock of the session.
func Migrate(ctx context.Context, url string) (err error) {
	defer wrap(&err, "bring the schema up to date")
	return withGoose(url, func(p *goose.Provider) error {
		_, err := p.Up(ctx)
		return err
	})
}

// MigrateDown takes the schema, and all it holds, away. Tests use it.
func MigrateDown(ctx context.Context, url string) (err error) {
	defer wrap(&err, "take the schema down")
	return withGoose(url, func(p *goose.Provider) error {
		_, err := p.DownTo(ctx, 0)
		return err
	})
}

func withGoose(url string, fn func(*goose.Provider) error) error {
	config, err := pgx.ParseConfig(url)
	if err != nil {
		return fmt.Errorf("database url: %w", err)
	}
	database := stdlib.OpenDB(*config)
	defer database.Close()
	locker, err := lock.NewPostgresSessionLocker(lock.WithLockTimeout(1, 300)) // look again every second, for five minutes
	if err != nil {
		return err
	}
	provider, err := goose.NewProvider(goose.DialectPostgres, database, migrations.FS, goose.WithSessionLocker(locker))
	if err != nil {
		return err
	}
	return fn(provider)
}
