package dbtest

import "testing"

func TestMain(m *testing.M) { Main(m) }

func TestNewGivesADatabaseThatAnswers(t *testing.T) {
	t.Parallel()
	if err := New(t).Ping(t.Context()); err != nil {
		t.Fatal(err)
	}
}

func TestDatabasesAreApart(t *testing.T) {
	t.Parallel()
	if a, b := URL(t), URL(t); a == b {
		t.Fatalf("two tests share %s", a)
	}
}
