package dbtest

import (
	"context"
	"testing"

	"github.com/jackc/pgx/v5"
)

func TestMain(m *testing.M) { Main(m) }

func TestNewGivesADatabaseThatAnswers(t *testing.T) {
	t.Parallel()
	if err := New(t).Ping(t.Context()); err != nil {
		t.Fatal(err)
	}
}

func TestDatabasesAreApart(t *testing.T) {
	t.Parallel()
	a, b := URL(t), URL(t)
	run(t, a, "CREATE TABLE mine ()")
	run(t, b, "CREATE TABLE mine ()") // would be there already
}

func TestADatabaseIsDroppedWithItsTest(t *testing.T) {
	t.Parallel()
	var url string
	t.Run("inner", func(t *testing.T) {
		url = URL(t)
		run(t, url, "SELECT FROM wafer") // migrated
		New(t)                           // its open pool must not hinder the end
	})
	conn, err := pgx.Connect(t.Context(), url)
	if err == nil {
		conn.Close(t.Context())
		t.Fatalf("%s is still there", url)
	}
}

func TestAnEmptyDatabaseHasNoSchema(t *testing.T) {
	t.Parallel()
	run(t, EmptyURL(t), "CREATE TABLE wafer ()") // would be there already
}

func run(t *testing.T, url, sql string) {
	t.Helper()
	conn, err := pgx.Connect(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.WithoutCancel(t.Context()))
	if _, err := conn.Exec(t.Context(), sql); err != nil {
		t.Fatalf("%s: %v", sql, err)
	}
}

// BenchmarkURL is what a test pays for its database.
func BenchmarkURL(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		admin(b, "DROP DATABASE IF EXISTS bench")
		admin(b, "CREATE DATABASE bench TEMPLATE "+template)
	}
}
